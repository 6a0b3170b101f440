"""Empirical variograms on a bounded, seeded sample of pairs, and weighted least squares on them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.structure.covariance import Covariance, Structure, check_points
from texture.structure.models import scale_factor

__all__ = ["EmpiricalVariogram", "empirical_variogram", "fit_variogram"]

Array = NDArray[np.float64]

# Three million pairs (2,450 stations taken whole) give a variogram whose own sampling noise is far below the
# field's; more only costs time.
MOST_PAIRS = 3_000_000


@dataclass(frozen=True)
class EmpiricalVariogram:
    """Semivariances by distance class.

    Parameters
    ----------
    distance_m : float array, shape (b,)
        Mean distance of the pairs of each class.
    semivariance : float array, shape (b,)
    pairs : int array, shape (b,)
        Pairs in each class; empty classes are left out.
    estimator : str
    """

    distance_m: Array
    semivariance: Array
    pairs: NDArray[np.int64]
    estimator: str


def _pair_differences(points: Array, values: Array, survey: Any, seed: int) -> tuple[Array, Array]:
    """Distances and absolute differences of all pairs, or of a seeded sample of stations' pairs."""
    n = len(points)
    most = int((1 + np.sqrt(1 + 8 * MOST_PAIRS)) / 2)
    if n <= most:
        i, j = np.triu_indices(n, 1)
    else:
        # Pairs of a random subset would lose the short distances first; random pairs plus each station's nearest
        # neighbours keep both ends.
        rng = np.random.default_rng(seed)
        i = rng.integers(0, n, MOST_PAIRS // 2)
        j = rng.integers(0, n - 1, MOST_PAIRS // 2)
        j = j + (j >= i)
        from scipy.spatial import cKDTree

        some = rng.choice(n, min(n, MOST_PAIRS // 64), replace=False)
        near = cKDTree(points).query(points[some], k=33)[1]
        i = np.concatenate([i, np.repeat(some, 32)])
        j = np.concatenate([j, near[:, 1:].ravel()])
    if survey is not None:
        same = survey[i] == survey[j]
        i, j = i[same], j[same]
    return np.sqrt(((points[i] - points[j]) ** 2).sum(axis=1)), np.abs(values[i] - values[j])


def empirical_variogram(
    points: ArrayLike,
    values: ArrayLike,
    edges_m: ArrayLike | None = None,
    estimator: str = "cressie_hawkins",
    survey: ArrayLike | None = None,
    seed: int = 0,
) -> EmpiricalVariogram:
    """Empirical variogram of one column of values.

    Parameters
    ----------
    points : float array, shape (n, d), metres
    values : float array, shape (n,)
        NaN values are left out.
    edges_m : float array, shape (b + 1,), optional
        Edges of the distance classes, each open below and closed above. Default: 15 equal classes to a third of the
        diagonal of the bounding box.
    estimator : {"cressie_hawkins", "matheron", "dowd"}
        Matheron (1963): half the mean squared difference. Cressie & Hawkins (1980): the fourth power of the mean
        root difference, which outliers move less; without their term in 1/N**2. Dowd (1984): 2.198 times half the
        squared median difference.
    survey : int array, shape (n,), optional
        Pairs across surveys are left out, so that offsets between surveys do not enter.
    seed : int
        Draws the sample of pairs where there are more than 3,000,000.

    Examples
    --------
    The textbook case of five values a metre apart:

    >>> v = empirical_variogram([[0.], [1], [2], [3], [4]], [1., 3, 2, 5, 4], [0.5, 1.5, 2.5], "matheron")
    >>> v.semivariance
    array([1.875, 1.5  ])
    """
    z = np.asarray(values, dtype=np.float64)
    known = np.isfinite(z)
    places, z = check_points(points)[known], z[known]
    labels = None if survey is None else np.asarray(survey)[known]
    if len(z) < 2:
        raise StructureError(f"variogram: found {len(z)} stations with a value, expected at least 2")
    if edges_m is None:
        edges = np.linspace(0.0, float(np.linalg.norm(np.ptp(places, axis=0))) / 3.0, 16)
    else:
        edges = np.asarray(edges_m, dtype=np.float64)
    distance, difference = _pair_differences(places, z, labels, seed)
    which = np.searchsorted(edges, distance, side="left") - 1
    inside = (which >= 0) & (which < len(edges) - 1)
    which, distance, difference = which[inside], distance[inside], difference[inside]
    pairs = np.bincount(which, minlength=len(edges) - 1)
    filled = pairs > 0
    count = pairs[filled]
    mean_distance = np.bincount(which, distance, len(edges) - 1)[filled] / count
    if estimator == "matheron":
        gamma = np.bincount(which, difference**2, len(edges) - 1)[filled] / count / 2.0
    elif estimator == "cressie_hawkins":
        root = np.bincount(which, np.sqrt(difference), len(edges) - 1)[filled] / count
        gamma = root**4 / (0.457 + 0.494 / count) / 2.0
    elif estimator == "dowd":
        order = np.argsort(which, kind="stable")
        groups = np.split(difference[order], np.cumsum(pairs)[:-1])
        gamma = np.array([2.198 * np.median(g) ** 2 / 2.0 for g in groups if len(g)])
    else:
        raise StructureError(f"estimator: found {estimator!r}, expected matheron, cressie_hawkins or dowd")
    return EmpiricalVariogram(mean_distance, gamma, count, estimator)


def fit_variogram(
    variogram: EmpiricalVariogram,
    model: str = "spherical",
    smoothness: float | None = None,
    weights: str = "pairs_over_square_distance",
) -> tuple[Covariance, float]:
    """Weighted least squares of one structure and a nugget on an empirical variogram.

    The sills enter linearly, so for each range they follow from non-negative least squares and only the range is
    searched: no starting values, no local optimum of the sills.

    Parameters
    ----------
    variogram : EmpiricalVariogram
    model, smoothness
        As in `Structure`.
    weights : {"pairs_over_square_distance", "pairs", "equal"}

    Returns
    -------
    covariance : Covariance
        The nugget is its `small_scale`; a variogram without a rise gives a covariance without structure.
    loss : float
        Weighted sum of squares at the optimum.

    Raises
    ------
    StructureError
        No pair of stations in any distance class, or unknown weights.
    """
    from scipy.optimize import minimize_scalar, nnls

    h, gamma, pairs = variogram.distance_m, variogram.semivariance, variogram.pairs.astype(np.float64)
    if h.size == 0:
        raise StructureError(
            "variogram: found no two stations (of one survey, where surveys are told apart) as near to each other as its distance "
            "classes reach, expected at least one such pair; use more stations, or a method that fits none, such as inverse_distance"
        )
    if weights == "pairs_over_square_distance":
        w = np.sqrt(pairs) / h
    elif weights == "pairs":
        w = np.sqrt(pairs)
    elif weights == "equal":
        w = np.ones_like(h)
    else:
        raise StructureError(f"weights: found {weights!r}, expected pairs_over_square_distance, pairs or equal")
    shape = Structure(model, 1.0, scale_factor(model, smoothness), smoothness)

    def solve(log_range: float) -> tuple[Array, float]:
        rise = Covariance([shape]).variogram(h / np.exp(log_range) * shape.range_m)
        design = np.column_stack([np.ones_like(h), rise]) * w[:, None]
        sills, residual = nnls(design, gamma * w)
        return sills, float(residual**2)

    grid = np.linspace(np.log(0.3 * h.min()), np.log(3.0 * h.max()), 60)
    best = int(np.argmin([solve(g)[1] for g in grid]))
    low, high = grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)]
    found = minimize_scalar(lambda g: solve(g)[1], bounds=(low, high), method="bounded", options={"xatol": 1e-10})
    (nugget, sill), loss = solve(float(found.x))
    if sill <= 1e-9 * max(nugget, 1e-300):
        return Covariance([], small_scale=max(float(nugget), 1e-300)), loss
    return Covariance(
        [Structure(model, float(sill), float(np.exp(found.x)), smoothness)], small_scale=float(nugget)
    ), loss
