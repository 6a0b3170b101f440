"""How much sediment lies where: tonnes of each class by group of cells, with a range from the map's own uncertainty."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from texture.bed.bed import Bed, in_blocks
from texture.bed.cells import Bools, Cells, Floats, Ints
from texture.recipe import Bed as BedSettings

__all__ = ["HOW", "Group", "Stock", "depth_groups", "take_stock"]

PAIRS = 4000
"""Pairs of cells drawn for one mean correlation: its standard error is 0.008 at most, since a correlation lies in 0 to 1."""
ALL_PAIRS_TO = 64
"""Up to this many cells every pair is taken."""

HOW = (
    "The range is 90 %: the distances from each cell's mean to its 5 and 95 % quantiles, summed over the cells and multiplied "
    "by the square root of their mean correlation, which is that of the fitted structure at the cells' distances. A plain sum "
    "of quantiles would have all cells low, or all high, at once; independent cells would have next to no range. Samples between "
    "two cells make their errors less alike than that, so the range is rather too wide. Thickness, density and layers without samples "
    "are taken as given."
)
"""How the range is made, for a reader. On the demo, whose bed is known, 18 of 20 ranges hold the true tonnes."""

Alike = Callable[[Ints, Ints], Floats]
"""Correlation of the bed between pairs of cells, from two arrays of cell numbers."""


@dataclass(frozen=True, eq=False)
class Group:
    """Cells that are counted together.

    Attributes
    ----------
    zone : str
        "all" where there are no zones.
    depth_from_m, depth_to_m : float
        Limits of the depth band, NaN where it has none.
    cells : bool array, shape (n,)
    """

    zone: str
    depth_from_m: float
    depth_to_m: float
    cells: Bools


@dataclass(frozen=True)
class Stock:
    """Dry mass of one class in one group of cells, all layers.

    Attributes
    ----------
    zone, depth_from_m, depth_to_m
        Of the group.
    sediment : str
        Name of the class.
    cells : int
    area_km2, tonnes : float
    tonnes_low, tonnes_high : float
        See `HOW`; NaN for a method without a variance.
    """

    zone: str
    depth_from_m: float
    depth_to_m: float
    sediment: str
    cells: int
    area_km2: float
    tonnes: float
    tonnes_low: float
    tonnes_high: float


def depth_groups(active: Bools, depth_m: Floats | None, limits_m: Sequence[float]) -> list[Group]:
    """All water cells, then one group for each depth band that has any.

    Parameters
    ----------
    active : bool array, shape (n,)
    depth_m : float array, shape (n,), or None
        Positive down; NaN where unknown. None: no bands.
    limits_m : sequence of float
        From shallow to deep. A cell on a limit belongs to the deeper band; cells without a depth to a group whose
        limits are both NaN.

    Examples
    --------
    >>> groups = depth_groups(np.array([True, True, False]), np.array([5.0, 10.0, 3.0]), [10.0, 20.0])
    >>> [(g.depth_from_m, g.depth_to_m, int(g.cells.sum())) for g in groups]
    [(nan, nan, 2), (nan, 10.0, 1), (10.0, 20.0, 1)]
    """
    groups = [Group("all", np.nan, np.nan, active)]
    if depth_m is None:
        return groups
    edges = [np.nan, *limits_m, np.nan]
    band = np.searchsorted(np.asarray(limits_m, dtype=np.float64), depth_m, side="right")
    known = np.isfinite(depth_m)
    for i, (low, high) in enumerate(pairwise(edges)):
        groups.append(Group("all", low, high, active & known & (band == i)))
    groups.append(Group("depth not known", np.nan, np.nan, active & ~known))
    return [g for g in groups if g.cells.any()]


def take_stock(
    bed: Bed, settings: BedSettings, cells: Cells, fractions: Floats, quantiles: NDArray[np.floating], groups: Sequence[Group],
    alike: Alike, seed: int = 1,
) -> list[Stock]:  # fmt: skip
    """Count the tonnes of each class in each group.

    Parameters
    ----------
    bed : Bed
        Its tonnes are counted, rim and least fractions included.
    settings : texture.recipe.Bed
        Which layers repeat the map; those from cores vary with it.
    cells : Cells
    fractions : float array, shape (n, parts)
        The map.
    quantiles : float array, shape (3, n, parts)
        Of the cell means at 0.05, 0.5 and 0.95; NaN for a method without a variance.
    groups : sequence of Group
    alike : callable
        See `Alike`.
    seed : int
        Of the pairs that are drawn.
    """
    classes = bed.classes
    same = np.array([layer.fill in ("same", "cores") for layer in settings.layers])
    mapped = (bed.erodible_thickness * bed.dry_density)[same].sum(axis=0) * cells.area_m2 / 1000.0
    mapped *= 1.0 - bed.rim_weight  # tonnes for each unit of a fraction that the map has
    stocks = []
    for group in groups:
        some = np.flatnonzero(group.cells)
        area_km2 = float(cells.area_m2[some].sum() / 1e6)
        tonnes, below, above = np.zeros((3, len(classes.names)))
        weights = np.empty((len(classes.names), some.size), dtype=np.float32)
        for block in in_blocks(some.size):
            here = some[block]
            tonnes += bed.tonnes_each(here, cells.area_m2[here]).sum(axis=1)
            gain = mapped[here] * classes.share[:, None]
            mean, (low, _, high) = fractions[here].T[classes.part], quantiles[:, here].swapaxes(1, 2)[:, classes.part]
            down, up = gain * np.maximum(mean - low, 0.0), gain * np.maximum(high - mean, 0.0)
            below, above = below + down.sum(axis=1), above + up.sum(axis=1)
            weights[:, block] = down + up
        for k, name in enumerate(classes.names):
            factor = np.sqrt(mean_correlation(some, weights[k], alike, seed))
            least = float(np.maximum(tonnes[k] - factor * below[k], 0.0))
            stocks.append(
                Stock(group.zone, group.depth_from_m, group.depth_to_m, name, int(some.size), area_km2, float(tonnes[k]), least,
                      float(tonnes[k] + factor * above[k]))
            )  # fmt: skip
    return stocks


def mean_correlation(cells: Ints, weights: NDArray[np.floating], alike: Alike, seed: int = 1) -> float:
    """Mean correlation of pairs of cells, each drawn by its weight: Σ w_i w_j ρ_ij / (Σ w)².

    With it, the spread of a sum is the sum of the spreads times its square root.

    Parameters
    ----------
    cells : int array, shape (m,)
    weights : float array, shape (m,)
        Spread of each cell's share of the sum; NaN gives NaN, all zero gives 1.
    alike : callable
    seed : int

    Examples
    --------
    Four independent cells of one weight: the spread of the sum is half the sum of the spreads.

    >>> mean_correlation(np.arange(4), np.ones(4), lambda a, b: (a == b).astype(float))
    0.25
    """
    total = float(weights.sum(dtype=np.float64))
    if not np.isfinite(total):
        return np.nan
    if total == 0.0:
        return 1.0
    if cells.size <= ALL_PAIRS_TO:
        i, j = (a.ravel() for a in np.indices((cells.size, cells.size)))
        exact = weights.astype(np.float64)
        return float((exact[i] * exact[j] * alike(cells[i], cells[j])).sum() / total**2)
    rng = np.random.default_rng(seed)
    bounds = np.cumsum(weights, dtype=np.float64) / total
    drawn = np.minimum(np.searchsorted(bounds, rng.random((2, PAIRS)), side="right"), cells.size - 1)
    return float(np.clip(alike(cells[drawn[0]], cells[drawn[1]]).mean(), 0.0, 1.0))
