"""The treatments of zeros that held-out error chooses from: fitted on all stations, started anew in folds."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.learning import Learned, learn, learn_all
from texture.recipe import Recipe
from texture.space import PLANE, Space
from texture.treatments import Censor, Presence, Shares, Treatment, candidates, plain_treatment

if TYPE_CHECKING:
    from texture.mapping import Mapper
    from texture.observations import Observations
    from texture.recipe import Method
    from texture.structure import CovarianceSet
    from texture.zones import Share

__all__ = ["LimitEffect", "fit_candidates", "limit_effect", "warm_start", "with_columns_of"]

Floats = NDArray[np.float64]
MOST_LIMIT = 0.33  # a limit of a third of three parts would replace them all


@dataclass(frozen=True)
class LimitEffect:
    """How far the map's mean moves with the limit that zeros are treated at.

    Attributes
    ----------
    limit : float
    mean, halved, doubled : tuple of float
        Mean fraction of each part over the cells looked at, with the limit, half of it, and twice of it.
    cells : int
        Number of cells looked at.
    """

    limit: float
    mean: tuple[float, ...]
    halved: tuple[float, ...]
    doubled: tuple[float, ...]
    cells: int


def fit_candidates(observations: Observations, recipe: Recipe, space: Space = PLANE) -> tuple[Learned, list[Learned]]:
    """Fit the plain treatment, and every one that the recipe lets held-out error choose from, in the space of its method.

    Returns
    -------
    plain : Learned
        Replacement at the laboratory's limit: what methods without a variance are given.
    learned : list of Learned
        The simplest first; the first is `plain` itself where the recipe allows it.
    """
    from texture.predict import METHODS

    plain = learn(plain_treatment(recipe.composition), observations, recipe.method, space=space)
    wanted = candidates(recipe.composition, observations, METHODS[recipe.method.tried_with].has_variance)
    if any(zone.soft_edge_m == 0.0 for zone in recipe.zones):
        wanted = [t for t in wanted if not isinstance(t, Censor)]  # its sweeps would carry values across the edge
    others = [t for t in wanted if t != plain.treatment]
    found = learn_all([(t, observations, warm_start(t, plain)) for t in others], recipe.method, space)
    return plain, [plain] * (len(wanted) > len(others)) + found


def warm_start(treatment: Treatment, plain: Learned) -> CovarianceSet | None:
    """Where the fit of a treatment begins; None where the plain columns say nothing of its own."""
    from texture.structure import Covariance, CovarianceSet, Structure

    if isinstance(treatment, Shares):
        return None
    if not isinstance(treatment, Presence):
        return plain.structure
    # An indicator is not continuous anywhere on its edges: its variogram rises at once, as the exponential one does.
    own = plain.structure[treatment.own]
    range_m = own.range_m or float(np.linalg.norm(np.ptp(plain.observations.points, axis=0))) / 3.0
    indicator = Covariance([Structure("exponential", 0.15, range_m)], small_scale=0.05, axis_scales=own.axis_scales)
    return CovarianceSet([*plain.structure, indicator])


def limit_effect(
    learned: Learned,
    method: Method,
    places: Floats,
    make: Callable[[Learned], Mapper],
    share: Share | None = None,
) -> LimitEffect | None:
    """Map some places with the limit of a treatment halved and doubled; None for shares, which know none.

    Parameters
    ----------
    learned : Learned
        What the map is made from, before calibration.
    method : Method
        Of the recipe.
    places : float array, shape (m, 2)
        Cells in the plane, a few thousand at most.
    make : callable
        Makes of something learned what the map would be made with: the chosen method, calibrated, in its zones.
    share : Share, optional
        Of the places, where there are zones.
    """
    treatment = learned.treatment
    if isinstance(treatment, Shares):
        return None
    limits = [treatment.limit / 2.0, min(treatment.limit * 2.0, MOST_LIMIT)]
    others = learn_all(
        [(treatment.with_limit(v), learned.observations, learned.structure) for v in limits], method, learned.space
    )
    means = []
    for other in (learned, *others):
        mapper = make(other)
        mean, variance = mapper.predict(places, share)
        fractions = mapper.back(mean) if method.estimate == "median" else mapper.expected(mean, variance)
        fractions = mapper.impose(fractions, share)
        means.append(tuple(float(v) for v in fractions.mean(axis=0)))
    return LimitEffect(treatment.limit, means[0], means[1], means[2], len(places))


def with_columns_of(structure: CovarianceSet, learned: Learned, other: Learned, theirs: CovarianceSet) -> CovarianceSet:
    """A warm start for a fold: `theirs` (fitted in this fold) in the columns that two treatments share, else `structure`."""
    from texture.structure import CovarianceSet

    columns = list(structure)
    for v in range(min(len(columns), len(theirs))):
        same = np.array_equal(learned.values[:, v], other.values[:, v], equal_nan=True)
        if same and np.array_equal(learned.noise[:, v], other.noise[:, v]):
            columns[v] = theirs[v]
    return CovarianceSet(columns, structure.correlation)
