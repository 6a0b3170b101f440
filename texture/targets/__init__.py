"""The cells to fill: reading grids, land and water, open boundary."""

from texture.targets.points import cell_points, points_per_side
from texture.targets.read import read_target
from texture.targets.target import Target

__all__ = ["Target", "cell_points", "points_per_side", "read_target"]
