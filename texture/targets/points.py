"""Points inside cells, so that a cell's value is the mean over its own area."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from texture.targets.target import Target

__all__ = ["cell_points", "points_per_side"]

ToPlane = Callable[[NDArray[np.float64], NDArray[np.float64]], NDArray[np.float64]]


def points_per_side(setting: str | int, cell_side_m: float, range_m: float) -> int:
    """Return how many points a cell needs along each side.

    With "auto", one where the cell is below a twentieth of the fitted range (the correlation across it
    is then above 0.86 even for the exponential model), else two, and three from a fifth of the range.
    """
    if setting != "auto":
        return math.isqrt(int(setting))
    share = cell_side_m / range_m if range_m > 0.0 else 0.0
    return 1 if share < 0.05 else 2 if share < 0.2 else 3


def cell_points(target: Target, cells: NDArray[np.int64], per_side: int, to_plane: ToPlane) -> NDArray[np.float64]:
    """Return points spread evenly inside cells, shape (cells, per_side ** 2, 2), in plane metres.

    One point is the cell's given centre; more are bilinear between its corners, at the middles of
    equal parts.
    """
    if per_side == 1:
        return to_plane(target.longitude[cells], target.latitude[cells])[:, None, :]
    lon, lat = target.corner_longitude[cells], target.corner_latitude[cells]
    corners = to_plane(lon.ravel(), lat.ravel()).reshape(cells.size, 4, 2)
    middles = (np.arange(per_side) + 0.5) / per_side
    u, v = (a.ravel() for a in np.meshgrid(middles, middles))
    weights = np.column_stack([(1 - u) * (1 - v), u * (1 - v), u * v, (1 - u) * v])
    return np.asarray(np.einsum("pk,nkc->npc", weights, corners))
