"""Real parts: their ranges, grids, tolerances, losses and strays, as data with the basis of every value."""
