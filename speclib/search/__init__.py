"""Finding neighbours and inferring the unknown's mass from rows handed in; this room never opens the library."""
