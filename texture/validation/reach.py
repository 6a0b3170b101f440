"""How far the samples reach: which places are further from them than anything that was tested."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["beyond_reach", "validated_reach_m"]


def validated_reach_m(held_out_distances: NDArray[np.float64]) -> float:
    """Return the distance up to which cross-validation has tested the map, metres.

    The upper whisker of the held-out distances (third quartile + 1.5 × the interquartile range, no more
    than the largest), the threshold of Meyer & Pebesma (2021), Methods in Ecology and Evolution 12, here
    on position alone.

    >>> validated_reach_m(np.array([1.0, 2.0, 3.0, 4.0, 100.0]))
    7.0
    """
    low, high = np.quantile(held_out_distances, [0.25, 0.75])
    return float(min(high + 1.5 * (high - low), held_out_distances.max()))


def beyond_reach(points: NDArray[np.float64], stations: NDArray[np.float64], reach_m: float) -> NDArray[np.bool_]:
    """Tell which points lie further than the reach from every station, shape (n,)."""
    from scipy.spatial import KDTree

    distance, _ = KDTree(stations).query(points, distance_upper_bound=np.nextafter(reach_m, np.inf))
    return np.asarray(~np.isfinite(distance))
