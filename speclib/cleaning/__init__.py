"""Steps that make a spectrum comparable; each returns a new object and never changes what was read."""
