"""How much of the small-scale variation averages out inside a cell."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["averaged_out", "sampling_distance_m"]

Array = NDArray[np.float64]
NODES = 24  # Gauss-Legendre nodes each way: the share to 1e-4 at any size of cell
SIZES = np.concatenate([[0.0], np.geomspace(1e-3, 1e3, 121)])  # cell side over range; between them, to 1e-3


def sampling_distance_m(points: Array) -> float:
    """Median distance from a station to the nearest one elsewhere, metres; 0 where all stand at one place.

    >>> sampling_distance_m(np.array([[0.0, 0.0], [3.0, 4.0], [3.0, 4.0]]))
    5.0
    """
    from scipy.spatial import KDTree

    places = np.unique(np.round(points), axis=0)  # a metre apart is one place
    return float(np.median(KDTree(places).query(places, k=2)[0][:, 1])) if len(places) > 1 else 0.0


def averaged_out(side_m: ArrayLike, range_m: float) -> Array:
    """Share of the variance of a spherical structure that averages out inside square cells.

    One minus the mean correlation of two points in the cell. What is called small-scale variation is all that changes below the
    distance between samples, so its range is anything up to that. The distance itself as `range_m` lets the least average
    out, and so gives the widest interval of a cell mean that the samples allow.

    Parameters
    ----------
    side_m : array-like, shape (n,)
        Side of each cell.
    range_m : float
        Range of the structure; 0 averages out in any cell but a point.

    Examples
    --------
    >>> averaged_out([0.0, 500.0, 1e6], 1000.0).round(3)
    array([0.   , 0.376, 1.   ])
    """
    side = np.asarray(side_m, dtype=np.float64)
    if range_m <= 0.0:
        return np.where(side > 0.0, 1.0, 0.0)
    return np.asarray(np.interp(side / range_m, SIZES, [_share(size) for size in SIZES]))


def _share(size: float) -> float:
    """Share in a square of `size` ranges: differences along a side have the density 2 (1 - t)."""
    # The correlation ends at one range: beyond it there is nothing to integrate.
    edge = min(1.0, 1.0 / size) if size > 0.0 else 1.0
    x, w = np.polynomial.legendre.leggauss(NODES)
    t, w = 0.5 * edge * (x + 1.0), 0.5 * edge * w
    h = np.minimum(size * np.hypot(t[:, None], t), 1.0)
    weight = 4.0 * np.outer(w * (1.0 - t), w * (1.0 - t))
    return 1.0 - float((weight * (1.0 - 1.5 * h + 0.5 * h**3)).sum())
