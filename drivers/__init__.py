"""How a stress-update routine is exercised at one integration point, and what is concluded from it."""
