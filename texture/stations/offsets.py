"""Methods of the laboratory that measure side by side, and how much more mud one of them reads."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["Offset", "method_offsets"]

FloatArray = npt.NDArray[np.float64]
FEWEST = 8  # pairs; fewer do not tell an offset from patchiness
RADIUS_M = 6_371_008.8
TO_SIGMA = 1.4826  # median absolute deviation to standard deviation of a normal
MEDIAN_ERROR = 1.2533  # standard error of a median over that of a mean, √(π / 2)


@dataclass(frozen=True)
class Offset:
    """How much a method reads above another one beside it.

    Parameters
    ----------
    method, other : str
    offset, standard_error : float
        Of `method` above `other`, in the unit of the values.
    pairs : int
    within_m : float
        Largest distance of a pair.
    """

    method: str
    other: str
    offset: float
    standard_error: float
    pairs: int
    within_m: float

    def text(self, what: str) -> str:
        """Words for it."""
        size = f"{abs(self.offset):.2f} ± {self.standard_error:.2f} in {what}, from {self.pairs} pairs within {self.within_m:,.0f} m"
        if abs(self.offset) <= 2.0 * self.standard_error:
            return f"{self.method} and {self.other} agree where they overlap: offset {size}"
        return f"{self.method} reads {'higher' if self.offset > 0 else 'lower'} than {self.other} where they overlap: {size}"


def method_offsets(
    longitude: FloatArray, latitude: FloatArray, values: FloatArray, method: npt.NDArray[np.object_]
) -> list[Offset]:
    """Fit the offset between each two methods from pairs of neighbouring stations.

    A pair is two stations that are each other's nearest of the other method, no further apart than stations usually are from
    their nearest neighbour. The offset is the median difference, which a few patches of another bed do not move.

    Parameters
    ----------
    longitude, latitude : float array, shape (n,), degrees
    values : float array, shape (n,)
        What is compared, such as a log-ratio; NaN is left out.
    method : object array of str, shape (n,)

    Returns
    -------
    offsets : list of Offset
        Of each two methods with at least eight pairs.

    Examples
    --------
    >>> lon = np.repeat(np.arange(10) * 0.01, 2)
    >>> values = np.tile([1.0, 1.5], 10) + np.repeat(np.arange(10.0), 2)
    >>> found = method_offsets(lon, np.zeros(20), values, np.array(["sieve", "laser"] * 10, dtype=object))[0]
    >>> found.offset, found.pairs
    (-0.5, 10)
    """
    from scipy.spatial import KDTree

    use = np.isfinite(longitude) & np.isfinite(latitude) & np.isfinite(values)
    values, method = values[use], method[use]
    x, y = np.radians(longitude[use]), np.radians(latitude[use])
    points = RADIUS_M * np.column_stack([np.cos(y) * np.cos(x), np.cos(y) * np.sin(x), np.sin(y)])
    names = sorted(set(method.tolist()))
    if len(names) < 2:
        return []
    alike = {name: KDTree(points[method == name]) for name in names}
    spacing = [tree.query(points[method == name], k=2)[0][:, 1] for name, tree in alike.items() if tree.n > 1]
    within = float(np.median(np.concatenate(spacing))) if spacing else 0.0
    out = []
    for other, name in itertools.combinations(names, 2):
        a, b = np.flatnonzero(method == other), np.flatnonzero(method == name)
        distance, near = alike[other].query(points[b])
        _, back = alike[name].query(points[a])
        mutual = (back[near] == np.arange(len(b))) & (distance <= within)
        if mutual.sum() < FEWEST:
            continue
        difference = values[b[mutual]] - values[a[near[mutual]]]
        middle = float(np.median(difference))
        spread = TO_SIGMA * float(np.median(np.abs(difference - middle)))
        error = MEDIAN_ERROR * spread / np.sqrt(mutual.sum())
        out.append(Offset(name, other, middle, error, int(mutual.sum()), float(distance[mutual].max())))
    return out
