"""How fast the kernels, the driver and the commands are, against other ways to get the same answer."""
