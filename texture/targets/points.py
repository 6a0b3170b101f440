"""Points inside cells, so that a cell's value is the mean over its own area."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from texture.targets.mesh import Mesh
from texture.targets.target import Target

__all__ = ["cell_points", "points_per_side"]

MOST_IN_A_FACE = 12
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
    """Return points spread over cells, shape (cells, p, d), in plane metres.

    One point is the cell's given centre. More are, in a cell of rows and columns, the middles of `per_side` ** 2 equal
    parts, bilinear between its corners. A mesh face is cut into one quadrilateral for each corner, whose middles they
    are; faces of different corner counts get a common multiple of them, and 12 at most. Nodes and places keep one.
    """
    if per_side == 1 or target.corners is None or target.piece_cell is not None:
        return to_plane(target.longitude[cells], target.latitude[cells])[:, None, :]
    corners = np.stack(target.corners.of(cells), axis=-1)
    plane = to_plane(corners[..., 0].ravel(), corners[..., 1].ravel())
    flat = plane.reshape(*corners.shape[:2], plane.shape[-1])
    if isinstance(target.topology, Mesh):
        return _face_points(flat, target.topology.corner_counts, cells)
    middles = (np.arange(per_side) + 0.5) / per_side
    u, v = (a.ravel() for a in np.meshgrid(middles, middles))
    weights = np.column_stack([(1 - u) * (1 - v), u * (1 - v), u * v, (1 - u) * v])
    return np.asarray(np.einsum("pk,nkc->npc", weights, flat))


def _face_points(
    corners: NDArray[np.float64], all_counts: NDArray[np.int64], cells: NDArray[np.int64]
) -> NDArray[np.float64]:
    """Middles of the quadrilaterals of each face, in turn until the common number is reached."""
    common = min(math.lcm(*(int(c) for c in np.unique(all_counts))), MOST_IN_A_FACE)
    counts = all_counts[cells][:, None]
    turn = np.arange(common) % counts
    after, before = (turn + 1) % counts, (turn - 1) % counts
    here, following, preceding = (np.take_along_axis(corners, k[..., None], axis=1) for k in (turn, after, before))
    real = (np.arange(corners.shape[1]) < counts)[..., None]
    middle = np.where(real, corners, 0.0).sum(axis=1, keepdims=True) / counts[..., None]
    return np.asarray((here + (here + following) / 2.0 + middle + (here + preceding) / 2.0) / 4.0)
