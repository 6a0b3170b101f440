"""Validate the methods of a recipe, and choose among treatments of zeros and methods: the same route as the map, on folds."""

from __future__ import annotations

from collections.abc import Callable, Generator, Mapping
from contextlib import closing
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np
from numpy.typing import NDArray

from texture.averaging_methods import average_held_out
from texture.choosing import LimitEffect, limit_effect, with_columns_of
from texture.cost import about, validate_seconds
from texture.learning import Learned, columns_in, learn, learn_each
from texture.mapping import Mapper, make_mapper
from texture.observations import Observations
from texture.progress import Progress
from texture.recipe import Recipe
from texture.scoring import Judge, Judged
from texture.space import PLANE, Space
from texture.support import Support, find_support
from texture.validation.attainable import Repeats
from texture.validation.choice import Standing, rank_methods
from texture.validation.columns import Columns
from texture.validation.folds import Folds, make_folds
from texture.validation.held_out import HeldOut, ScoreWeights
from texture.validation.resampling import block_weights, map_weights
from texture.zero_choice import Choice, Tried, choose

if TYPE_CHECKING:
    from texture.structure import CovarianceSet
    from texture.structure.plane import Plane
    from texture.targets import Target
    from texture.zones import Zones

__all__ = ["Journal", "Validation", "validate_methods"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
MOST_MAP_POINTS = 5_000  # cells that folds are matched to: the distribution of distances needs no more
MOST_LIMIT_CELLS = 2_000  # cells on which a halved and a doubled limit are tried: their mean needs no more
CONTROLS = ("nearest", "inverse_distance")


class Journal(Protocol):
    """Where finished folds are kept, so that an interrupted validation goes on where it stopped."""

    def get(self, run: int, fold: int) -> Mapping[str, Any] | None:
        """What was kept of one fold; None if nothing."""
        ...

    def put(self, run: int, fold: int, record: Mapping[str, Any]) -> None:
        """Keep arrays and plain objects of one fold."""
        ...


class Forgets:
    """Keeps nothing."""

    def get(self, run: int, fold: int) -> None:
        """Nothing was kept."""

    def put(self, run: int, fold: int, record: Mapping[str, Any]) -> None:
        """Let it go."""


@dataclass(frozen=True, eq=False)
class Validation:
    """What cross-validation found.

    Attributes
    ----------
    folds : Folds
    methods : list of HeldOut
        The map's method first, then those it was compared with.
    support : Support
        Where the samples support the map, and what error to expect.
    choice : Choice
        Every treatment of zeros that was compared, the simplest first, by one method, and what choosing is worth.
    learned : Learned
        The map's treatment on all stations, calibrated: what the map is made from.
    plain : Learned
        Replacement at the laboratory's limit: what the methods it is compared with were given.
    limit_effect : LimitEffect or None
        How far the map's mean moves with the limit; None where the treatment knows none.
    judged : Judged
        The map's method: its calibration, or the spread of its errors.
    standings : list of Standing
        All methods by energy score, the simplest first; empty where no station knows all parts.
    block_m : float
        Side of the blocks that scores are resampled in.
    searched : bool
        Whether the map's method was chosen among all.
    """

    folds: Folds
    methods: list[HeldOut]
    support: Support
    choice: Choice
    learned: Learned
    plain: Learned
    limit_effect: LimitEffect | None
    judged: Judged
    standings: list[Standing] = field(default_factory=list)
    block_m: float = np.nan
    searched: bool = False

    @property
    def tried(self) -> list[Tried]:
        """The record of each treatment of zeros."""
        return self.choice.tried

    @property
    def chosen(self) -> HeldOut:
        """Held-out predictions of the map's own method."""
        return self.methods[0]

    @property
    def method(self) -> str:
        """Name of the map's method."""
        return self.methods[0].method

    def mapper(self, recipe: Recipe, zones: Zones | None = None) -> Mapper:
        """Fit the map's method on all stations, in each zone on those that are heard there."""
        from texture.predict import solves

        factors = None if solves(self.method) else self.judged.factors
        return make_mapper(
            self.method,
            self.learned,
            recipe.method,
            self.judged.error,
            factors,
            zones,
            recipe.seed,
            **self.judged.settings,
        )


def validate_methods(
    observations: Observations,
    target: Target,
    plane: Plane,
    plain: Learned,
    treated: list[Learned],
    recipe: Recipe,
    progress: Progress,
    journal: Journal | None = None,
    spaces: Mapping[str, Space] | None = None,
    zones: Zones | None = None,
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
    journal : Journal, optional
    spaces : mapping of str to Space, optional
        Where each method takes distance; the plane where it is not named. In each space structure is fitted anew.
    zones : Zones, optional
        A station is predicted by the rule of the zone it stands in; in a zone whose composition is given it is not scored.
    """
    from texture.predict import METHODS

    limit, points = recipe.composition.detection_limit, observations.points
    cells = _map_cells(target, recipe.seed)
    places = plane.to_metres(target.longitude[cells], target.latitude[cells])
    block_m = _block_m(points, plain.structure, recipe.validation.count)
    folds = make_folds(
        recipe.validation.folds,
        points,
        recipe.validation.count,
        recipe.seed,
        targets=places,
        block_m=block_m,
        groups=observations.survey if recipe.validation.group_by == "survey" else None,
    )
    weights = ScoreWeights(map_weights(points, places), block_weights(points, block_m, recipe.seed))
    counts = observations.measured
    if zones is not None:
        counts = counts & ~zones.is_given(zones.stations.take(observations.rows))
    scored = np.where(counts[:, None], observations.fractions, np.nan)
    median = recipe.method.estimate == "median"
    repeats = Repeats(observations.repeats, observations.repeat_sd)
    judge = Judge(recipe.composition.parts, scored, folds.labels, weights, limit, median, repeats)
    own = recipe.method.tried_with
    compared = [n for n in recipe.methods if n != own and (n != "triangulation" or points.shape[1] == 2)]
    runs = [(own, learned) for learned in treated] + [
        (name, _plain_in((spaces or {}).get(name, PLANE), plain, recipe, METHODS[name].needs_covariance))
        for name in compared
    ]
    runs.sort(key=lambda run: run[0] == "average")  # made of what the others predicted
    fitted = sum(METHODS[name].needs_covariance for name, _ in runs)
    cost = about(validate_seconds(observations.count, fitted, folds.count))
    with progress.stage(
        f"validate {len(runs)} × {folds.count} folds, about {cost}", total=len(runs) * folds.count
    ) as advance:
        bench = _Bench(recipe, plain, folds, journal or Forgets(), advance, zones)
        judged: list[Judged] = []
        for number, (name, learned) in enumerate(runs):
            if name == "average":
                members: dict[str, Columns] = {
                    n: j.columns
                    for (n, other), j in zip(runs, judged, strict=False)
                    if other is plain and n not in ("mean", "average")
                }
                columns, settings = average_held_out(members, plain, counts, folds.labels)
                advance(folds.count)
            else:
                columns, settings = bench.run(number, name, learned), {}
            found = judge.judge(name, learned, columns, METHODS[name].has_variance)
            judged.append(replace(found, settings=settings))
    first = len(treated)
    held_out = [j.held_out for j in judged[:first]]
    choice = choose([run.treatment for run in treated], held_out, scored, limit, folds.labels)
    taken = next(i for i, t in enumerate(choice.tried) if t.chosen)
    controls = {j.held_out.method: j.held_out.predicted for j in judged if j.held_out.method in CONTROLS}
    judged = [judge.compare(j, controls) for j in judged]
    pairs = zip(choice.tried, judged[:first], strict=True)
    choice = replace(choice, tried=[replace(t, held_out=j.held_out) for t, j in pairs])
    methods = [judged[taken], *judged[first:]]
    standings = _standings([j.held_out for j in methods], weights)
    wanted: str = recipe.method.name
    if wanted == "best":
        wanted = next((s.method for s in standings if s.simplest), own)
    methods.sort(key=lambda j: j.held_out.method != wanted)
    chosen = methods[0]
    learned = runs[judged.index(chosen)][1]
    calibrated = _calibrated(learned, chosen)
    validation = Validation(
        folds,
        [j.held_out for j in methods],
        find_support(learned.space, calibrated.structure, points, folds, scored, chosen.held_out),
        choice,
        calibrated,
        plain,
        None,
        chosen,
        standings,
        block_m,
        searched=recipe.method.name == "best",
    )
    thinned = slice(None, None, max(1, -(-len(cells) // MOST_LIMIT_CELLS)))
    effect = limit_effect(
        learned,
        recipe.method,
        places[thinned],
        lambda other: replace(validation, learned=_calibrated(other, chosen)).mapper(recipe, zones),
        None if zones is None else zones.cells.take(cells[thinned]),
    )
    return replace(validation, limit_effect=effect)


def _calibrated(learned: Learned, judged: Judged) -> Learned:
    """What was learned, with the variances that a method's held-out errors want; other methods keep factors of their own."""
    from texture.predict import solves

    return (
        learned if judged.factors is None or not solves(judged.held_out.method) else learned.calibrated(judged.factors)
    )


def _plain_in(space: Space, plain: Learned, recipe: Recipe, fit: bool) -> Learned:
    """The plain treatment in a method's own space."""
    if space is plain.space:
        return plain
    if fit:
        return learn(plain.treatment, plain.observations, recipe.method, space=space)
    values, noise = columns_in(space, plain.treatment, plain.observations)
    return replace(plain, values=values, noise=noise, space=space)


def _standings(methods: list[HeldOut], weights: ScoreWeights) -> list[Standing]:
    from texture.predict import METHODS

    order = sorted(methods, key=lambda held: list(METHODS).index(held.method))
    return rank_methods([h.method for h in order], np.stack([h.draws.energy for h in order]), weights.resamples)


class _Bench:
    """Runs methods over the folds; the structure of the plain treatment in a fold serves others as a warm start."""

    def __init__(
        self,
        recipe: Recipe,
        plain: Learned,
        folds: Folds,
        journal: Journal,
        advance: Callable[[int], None],
        zones: Zones | None = None,
    ) -> None:
        self.recipe, self.plain, self.folds, self.zones = recipe, plain, folds, zones
        self.journal, self.advance = journal, advance
        self.plain_structures: dict[int, CovarianceSet] = {}

    def run(self, number: int, name: str, learned: Learned) -> Columns:
        """Predict every station from the folds that do not hold it out; finished folds are taken from the journal."""
        from texture.structure import CovarianceSet

        treatment, observations = learned.treatment, learned.observations
        sample_noise = learned.sample_noise
        found = Columns.empty(observations.count, len(treatment.column_names))
        pairs = self.folds.pairs()
        open_folds = []
        for fold, (_, test) in enumerate(pairs):
            record = self.journal.get(number, fold)
            if record is None:
                open_folds.append(fold)
                continue
            found.put(test, Columns(*(record[f] for f in Columns.__dataclass_fields__)))
            if record["structure"] is not None and learned is self.plain:
                self.plain_structures[fold] = CovarianceSet.from_dict(record["structure"])
            self.advance(1)
        with closing(self._learn(name, learned, [pairs[fold][0] for fold in open_folds], open_folds)) as folds:
            for fold, inside in zip(open_folds, folds, strict=True):
                test = pairs[fold][1]
                share = None if self.zones is None else self.zones.stations.take(observations.rows[test])
                mapper = make_mapper(name, inside, self.recipe.method, zones=self.zones, seed=self.recipe.seed)
                columns = mapper.columns(observations.points[test], sample_noise[test], share)
                found.put(test, columns)
                fitted = inside.structure is not learned.structure
                if fitted and learned is self.plain:
                    self.plain_structures[fold] = inside.structure
                arrays = {f: getattr(columns, f) for f in Columns.__dataclass_fields__}
                self.journal.put(number, fold, {**arrays, "structure": inside.structure.to_dict() if fitted else None})
                self.advance(1)
        return found

    def _learn(
        self, name: str, learned: Learned, trains: list[Ints], folds: list[int]
    ) -> Generator[Learned, None, None]:
        from texture.predict import METHODS

        if METHODS[name].needs_covariance:
            tasks = [
                (learned.treatment, learned.observations.take(train), self._start(learned, fold))
                for train, fold in zip(trains, folds, strict=True)
            ]
            yield from learn_each(tasks, self.recipe.method, learned.space)
            return
        for train in trains:
            stations = learned.observations.take(train)
            values, noise = columns_in(learned.space, learned.treatment, stations)
            yield replace(learned, observations=stations, values=values, noise=noise)

    def _start(self, learned: Learned, fold: int) -> CovarianceSet:
        first = self.plain_structures.get(fold)
        if first is None or learned.space is not self.plain.space:
            return learned.structure
        return with_columns_of(learned.structure, learned, self.plain, first)


def _block_m(points: Floats, structure: CovarianceSet, count: int) -> float:
    """Side of a block: the longest fitted range, but small enough for two blocks a fold."""
    extent = np.ptp(points[:, :2], axis=0)
    most = float(np.sqrt(extent[0] * extent[1] / (2.0 * count))) or float(extent.max()) / (2.0 * count)
    longest = max(c.range_m for c in structure)
    return min(longest, most) if longest > 0.0 else most


def _map_cells(target: Target, seed: int) -> Ints:
    cells = np.flatnonzero(target.active)
    if cells.size > MOST_MAP_POINTS:
        cells = np.sort(np.random.default_rng(seed).choice(cells, MOST_MAP_POINTS, replace=False))
    return cells
