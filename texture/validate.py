"""Validate the methods of a recipe: the same route as the map, on folds."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.mapping import fit_structure, make_mapper
from texture.observations import Observations
from texture.progress import Progress
from texture.recipe import Recipe
from texture.validation.cross_validate import HeldOut, cross_validate
from texture.validation.folds import Folds, make_folds
from texture.validation.reach import validated_reach_m

if TYPE_CHECKING:
    from texture.composition import LogRatio
    from texture.structure import CovarianceSet
    from texture.structure.plane import Plane
    from texture.targets import Target

__all__ = ["Validation", "validate_methods"]

Floats = NDArray[np.float64]
MOST_MAP_POINTS = 5_000  # cells that folds are matched to: the distribution of distances needs no more


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
    """

    folds: Folds
    methods: list[HeldOut]
    reach_m: float

    @property
    def chosen(self) -> HeldOut:
        """Held-out predictions of the map's own method."""
        return self.methods[0]


def validate_methods(
    observations: Observations,
    target: Target,
    plane: Plane,
    structure: CovarianceSet,
    logratio: LogRatio,
    recipe: Recipe,
    progress: Progress,
) -> Validation:
    """Cross-validate the recipe's method and those it is compared with, all on the same folds.

    The plane and the folds are fixed first; whatever learns from fractions is fitted anew inside each
    fold, from a warm start.
    """
    names = tuple(dict.fromkeys((recipe.method.name, *recipe.validation.compare)))
    folds = make_folds(
        recipe.validation.folds,
        observations.points,
        recipe.validation.count,
        recipe.seed,
        targets=_map_points(target, plane, recipe.seed),
        block_m=_block_m(observations.points, structure, recipe.validation.count),
    )
    structures: dict[bytes, CovarianceSet] = {}

    def refit(train: NDArray[np.int64]) -> CovarianceSet:
        key = train.tobytes()
        if key not in structures:
            structures[key] = fit_structure(observations.take(train), recipe.method, start=structure)
        return structures[key]

    def predictor(name: str):  # type: ignore[no-untyped-def]  # the callable's type is `Predict`
        def predict(train: NDArray[np.int64], test: NDArray[np.int64]) -> tuple[Floats, Floats]:
            inside = refit(train) if name == "kriging" else structure
            mapper = make_mapper(name, observations.take(train), inside, recipe.method, logratio)
            mean, variance = mapper.predict(observations.points[test])
            sample = mapper.sample_variance(variance, observations.noise[test])
            return mapper.expected(mean, variance), mapper.interval(mean, sample)

        return predict

    with progress.stage("validate", total=len(names) * folds.count) as advance:
        methods = [
            cross_validate(
                name,
                logratio.parts,
                observations.fractions,
                observations.measured,
                folds,
                predictor(name),
                logratio.detection_limit,
                advance,
            )
            for name in names
        ]
    return Validation(folds, methods, validated_reach_m(folds.held_out_distances(observations.points)))


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
