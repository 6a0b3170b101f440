"""Validate the methods of a recipe, and choose its treatment of zeros: the same route as the map, on folds."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.choosing import LimitEffect, Tried, choose, limit_effect, with_columns_of
from texture.mapping import Learned, learn_all, make_mapper
from texture.observations import Observations
from texture.progress import Progress
from texture.recipe import Recipe
from texture.validation.cross_validate import HeldOut, cross_validate
from texture.validation.folds import Folds, make_folds
from texture.validation.reach import validated_reach_m

if TYPE_CHECKING:
    from texture.structure import CovarianceSet
    from texture.structure.plane import Plane
    from texture.targets import Target

__all__ = ["Validation", "validate_methods"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
MOST_MAP_POINTS = 5_000  # cells that folds are matched to: the distribution of distances needs no more
MOST_LIMIT_CELLS = 2_000  # cells on which a halved and a doubled limit are tried: their mean needs no more


@dataclass(frozen=True, eq=False)
class Validation:
    """What cross-validation found.

    Attributes
    ----------
    folds : Folds
    methods : list of HeldOut
        The chosen method first, then those it was compared with.
    reach_m : float
        Distance from the samples up to which the map has been tested.
    tried : list of Tried
        Every treatment of zeros that was compared, the simplest first, by the map's method.
    learned : Learned
        The chosen treatment on all stations: what the map is made from.
    plain : Learned
        Replacement at the laboratory's limit: what the methods it is compared with were given.
    limit_effect : LimitEffect or None
        How far the map's mean moves with the limit; None where the treatment knows none.
    """

    folds: Folds
    methods: list[HeldOut]
    reach_m: float
    tried: list[Tried]
    learned: Learned
    plain: Learned
    limit_effect: LimitEffect | None

    @property
    def chosen(self) -> HeldOut:
        """Held-out predictions of the map's own method."""
        return self.methods[0]


def validate_methods(
    observations: Observations,
    target: Target,
    plane: Plane,
    plain: Learned,
    treated: list[Learned],
    recipe: Recipe,
    progress: Progress,
) -> Validation:
    """Cross-validate the recipe's method with each treatment of zeros, and those it is compared with, on the same folds.

    The plane and the folds are fixed first; whatever learns from fractions is fitted anew inside each
    fold, from a warm start. The methods of the comparison take the plain treatment: those without a variance
    can make nothing of another.

    Parameters
    ----------
    observations : Observations
    target : Target
    plane : Plane
    plain, treated : Learned, list of Learned
        As `texture.choosing.fit_candidates` made them.
    recipe : Recipe
    progress : Progress
    """
    from texture.predict import METHODS

    compared = tuple(n for n in dict.fromkeys(recipe.validation.compare) if n != recipe.method.name)
    places = _map_points(target, plane, recipe.seed)
    folds = make_folds(
        recipe.validation.folds,
        observations.points,
        recipe.validation.count,
        recipe.seed,
        targets=places,
        block_m=_block_m(observations.points, plain.structure, recipe.validation.count),
    )
    refit = _Refit(recipe, plain)
    with progress.stage("validate", total=(len(treated) + len(compared)) * folds.count) as advance:

        def run(name: str, learned: Learned) -> HeldOut:
            if METHODS[name].needs_covariance:
                refit.all(learned, folds)
            predict = _predictor(name, learned, refit, recipe)
            limit = recipe.composition.detection_limit
            measured = observations.fractions
            return cross_validate(
                name, recipe.composition.parts, measured, observations.measured, folds, predict, limit, advance
            )

        held_out = [run(recipe.method.name, learned) for learned in treated]
        methods = [run(name, plain) for name in compared]
    scored = np.where(observations.measured[:, None], observations.fractions, np.nan)
    tried = choose([learned.treatment for learned in treated], held_out, scored, recipe.composition.detection_limit)
    taken = next(i for i, t in enumerate(tried) if t.chosen)
    effect = limit_effect(treated[taken], recipe.method, places[:: max(1, -(-len(places) // MOST_LIMIT_CELLS))])
    reach_m = validated_reach_m(folds.held_out_distances(observations.points))
    return Validation(folds, [held_out[taken], *methods], reach_m, tried, treated[taken], plain, effect)


class _Refit:
    """A treatment learned anew from the stations of a fold; the plain one serves others as a warm start."""

    def __init__(self, recipe: Recipe, plain: Learned) -> None:
        self.recipe, self.plain = recipe, plain
        self.done: dict[tuple[int, bytes], Learned] = {}

    def __call__(self, learned: Learned, train: Ints) -> Learned:
        return self.done[id(learned), train.tobytes()]

    def all(self, learned: Learned, folds: Folds) -> None:
        """Learn a treatment in every fold that it was not yet learned in."""
        trains = [train for train, _ in folds.pairs() if (id(learned), train.tobytes()) not in self.done]
        tasks = [(learned.treatment, learned.observations.take(t), self._start(learned, t)) for t in trains]
        for train, found in zip(trains, learn_all(tasks, self.recipe.method), strict=True):
            self.done[id(learned), train.tobytes()] = found

    def _start(self, learned: Learned, train: Ints) -> CovarianceSet:
        first = self.done.get((id(self.plain), train.tobytes()))
        if first is None:
            return learned.structure
        return with_columns_of(learned.structure, learned, self.plain, first.structure)


def _predictor(
    name: str, learned: Learned, refit: _Refit, recipe: Recipe
) -> Callable[[Ints, Ints], tuple[Floats, Floats]]:
    from texture.predict import METHODS

    sample_noise = learned.treatment.columns(learned.observations)[1]

    def predict(train: Ints, test: Ints) -> tuple[Floats, Floats]:
        if METHODS[name].needs_covariance:
            inside = refit(learned, train)
        else:
            stations = learned.observations.take(train)
            values, noise = learned.treatment.columns(stations)
            inside = replace(learned, observations=stations, values=values, noise=noise)
        mapper = make_mapper(name, inside, recipe.method)
        mean, variance = mapper.predict(learned.observations.points[test])
        sample = mapper.sample_variance(variance, sample_noise[test])
        return mapper.expected(mean, variance), mapper.interval(mean, sample)

    return predict


def _block_m(points: Floats, structure: CovarianceSet, count: int) -> float:
    """Side of a block: the longest fitted range, but small enough for two blocks a fold."""
    extent = np.ptp(points[:, :2], axis=0)
    most = float(np.sqrt(extent[0] * extent[1] / (2.0 * count))) or float(extent.max()) / (2.0 * count)
    longest = max(c.range_m for c in structure)
    return min(longest, most) if longest > 0.0 else most


def _map_points(target: Target, plane: Plane, seed: int) -> Floats:
    cells = np.flatnonzero(target.active)
    if cells.size > MOST_MAP_POINTS:
        cells = np.sort(np.random.default_rng(seed).choice(cells, MOST_MAP_POINTS, replace=False))
    return plane.to_metres(target.longitude[cells], target.latitude[cells])
