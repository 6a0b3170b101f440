"""The cells to fill: reading grids, land and water, open boundary."""
