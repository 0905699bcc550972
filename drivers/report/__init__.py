"""Results in; tables, pictures and plain data out. No physics."""
