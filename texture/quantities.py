"""Further numbers of the samples, each mapped and validated by the machinery of the composition, on the same folds.

A quantity is one column on its own scale. It is fitted (`texture.learning.learn_all`), kriged and held out exactly as the
coordinates of a composition are, calibrated by its own held-out errors and in zones by their stations; what it means in its own unit
comes last.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition import Scale
from texture.errors import SampleError
from texture.estimate import CELLS_AT_ONCE, EXTRAPOLATED, QUANTILES, SUPPORTED, WIDER
from texture.learning import Learned, learn_all
from texture.mapping import Mapper, make_mapper
from texture.observations import Observations
from texture.progress import Progress
from texture.recipe import Quantity, Recipe
from texture.space import PLANE, Space
from texture.structure.averaging import averaged_out, sampling_distance_m
from texture.targets import Target, cell_points
from texture.validation.calibration import calibration_factors, out_of_fold_factors
from texture.validation.columns import Columns
from texture.validation.folds import Folds
from texture.validation.reach import beyond_reach, validated_reach_m
from texture.validation.scores import plain_scores

if TYPE_CHECKING:
    from texture.stations import Stations
    from texture.structure.plane import Plane
    from texture.zones import Share, Zones

__all__ = ["QuantityMap", "QuantityMethod", "QuantityModel", "learn_quantities", "map_quantities"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
FEWEST = 5  # stations on either side of a fold: with fewer nothing is learned
LEVELS = (0.05, 0.95)  # of the interval of a held-out sample
NORMAL_95 = 1.6448536269514722


@dataclass(frozen=True)
class _Column:
    """A quantity as `learn_all` and `Mapper` take it, which ask no more than `Columned`: one column, no composition."""

    quantity: Quantity
    scale: Scale
    value: Floats
    half_width: Floats

    @property
    def label(self) -> str:
        return self.quantity.scale

    @property
    def column_names(self) -> tuple[str, ...]:
        name = self.quantity.name
        return ({"plain": name, "log": f"ln({name})", "logit": f"logit({name})"}[self.quantity.scale],)

    def columns(self, observations: Observations) -> tuple[Floats, Floats]:
        """Scaled values and noise variances, shapes (n, 1): what is rounded may lie anywhere in its step."""
        value, half = self.value[observations.rows], np.nan_to_num(self.half_width[observations.rows])
        noise = (half * self.scale.slope(value)) ** 2 / 3.0
        return self.scale.forward(value)[:, None], np.nan_to_num(noise)[:, None]


@dataclass(frozen=True, eq=False)
class QuantityMethod:
    """Held-out predictions of one method, NaN at stations that do not know the quantity; shapes (n,) of all observations.

    `low` and `high` are the ends of the 90 % interval of a sample, calibrated on the other folds, NaN where the method has no
    variance. `factor` is the calibration from all folds.
    """

    method: str
    predicted: Floats
    low: Floats
    high: Floats
    scores: dict[str, float]
    factor: float = 1.0


@dataclass(frozen=True, eq=False)
class QuantityModel:
    """A quantity fitted on all its stations, and how wrong it was at those held out.

    Attributes
    ----------
    settings : Quantity
    mapper : Mapper
        Of one column, the quantity on its scale.
    points : float array
        Its stations in the plane.
    rows : int array
        Their rows of the stations table.
    measured : float array, shape (n,)
        As measured, NaN where not, for all observations of the run.
    methods : tuple of QuantityMethod
        The map's own method first.
    reach_m : float
        Distance from its stations up to which the map has been tested.
    """

    settings: Quantity
    mapper: Mapper[_Column]
    points: Floats
    rows: Ints
    measured: Floats
    methods: tuple[QuantityMethod, ...]
    reach_m: float

    @property
    def scale(self) -> Scale:
        """The scale it is mapped on."""
        return Scale(self.settings.scale, self.settings.most)

    def score_rows(self, folds: Folds) -> list[dict[str, str | float]]:
        """Rows for the table of scores; the part is the quantity, its errors in its own unit."""
        return [
            {"method": m.method, "treatment": self.settings.scale, "folds": folds.kind, "count": folds.count,
             "part": self.settings.name, "score": score, "value": value}
            for m in self.methods for score, value in m.scores.items()
        ]  # fmt: skip


@dataclass(frozen=True, eq=False)
class QuantityMap:
    """The map of a quantity as flat arrays over all cells of the target; NaN (or 0) outside active cells.

    Attributes
    ----------
    model : QuantityModel
    mean : float array, shape (n,)
        Expected mean of each cell, in the quantity's unit; NaN where a radius set by the user finds too few stations.
    quantiles : float array, shape (3, n)
        At 0.05, 0.5 and 0.95, of the cell mean; NaN for methods without a variance.
    evidence : int array, shape (n,)
        1 supported by samples that know it, 2 extrapolated, 6 wider fall-back; 0 where there is no map. Where a zone's composition
        is given the map around it goes on, flagged as extrapolated: the user gave no number.
    """

    model: QuantityModel
    mean: Floats
    quantiles: Floats
    evidence: NDArray[np.int8]


def learn_quantities(
    stations: Stations,
    observations: Observations,
    folds: Folds,
    recipe: Recipe,
    progress: Progress,
    spaces: Mapping[str, Space] | None = None,
    zones: Zones | None = None,
) -> tuple[QuantityModel, ...]:
    """Fit every quantity of the recipe and hold its stations out in the folds of the composition, each method in its space and
    each station in its zone.

    Raises
    ------
    SampleError
        If the stations that know a quantity are too few, or all stand in one fold.
    """
    if not recipe.quantities:
        return ()
    asked = dict.fromkeys((recipe.method.tried_with, *recipe.validation.compare))
    methods = tuple(name for name in asked if name != "average")  # its weights are those of the parts
    with progress.stage("further numbers", total=len(recipe.quantities) * len(methods)) as advance:
        places: dict[str, Space] = {name: (spaces or {}).get(name, PLANE) for name in methods}
        return tuple(
            _learn(q, stations, observations, folds, recipe, places, zones, advance) for q in recipe.quantities
        )


def _learn(
    quantity: Quantity,
    stations: Stations,
    observations: Observations,
    folds: Folds,
    recipe: Recipe,
    spaces: Mapping[str, Space],
    zones: Zones | None,
    advance: Callable[[int], None],
) -> QuantityModel:
    from texture.predict import solves
    from texture.stations.quantities import width_name

    value, half = (stations.table[c].to_numpy(dtype=np.float64) for c in (quantity.name, width_name(quantity.name)))
    column = _Column(quantity, Scale(quantity.scale, quantity.most), value, half)
    measured = value[observations.rows]
    known = np.flatnonzero(np.isfinite(measured))
    own = (
        replace(folds, labels=np.unique(folds.labels[known], return_inverse=True)[1].astype(np.int64))
        if known.size
        else folds
    )
    if known.size < FEWEST or own.count < 2:
        raise SampleError(
            f'quantities "{quantity.name}": {known.size} stations know it and the composition, in {own.count} folds; expected at least '
            f"{FEWEST} in 2; take the block out of the recipe"
        )
    some = observations.take(known)
    pairs = [(train, test) for train, test in own.pairs() if train.size >= FEWEST]
    found: dict[int, tuple[Learned[_Column], list[Learned[_Column]]]] = {}
    held_out = []
    for name, space in spaces.items():
        if id(space) not in found:
            whole = learn_all([(column, some, None)], recipe.method, space)[0]
            tasks = [(column, some.take(train), whole.structure) for train, _ in pairs]
            found[id(space)] = whole, learn_all(tasks, recipe.method, space)
        learned, inside = found[id(space)]
        columns = Columns.empty(known.size, 1)
        for (_, test), fold in zip(pairs, inside, strict=True):
            fitted = make_mapper(name, fold, recipe.method, zones=zones, seed=recipe.seed)
            share = None if zones is None else zones.stations.take(some.rows[test])
            columns.put(test, fitted.columns(some.points[test], learned.sample_noise[test], share))
        held_out.append(_judged(name, column.scale, columns, learned, own.labels, known, measured))
        advance(1)
    reach_m = validated_reach_m(own.held_out_distances(some.points))
    name = recipe.method.tried_with
    learned, factors = found[id(spaces[name])][0], np.array([held_out[0].factor])
    if solves(name):
        mapper = make_mapper(name, learned.calibrated(factors), recipe.method, zones=zones, seed=recipe.seed)
    else:
        mapper = make_mapper(name, learned, recipe.method, factors=factors, zones=zones, seed=recipe.seed)
    return QuantityModel(quantity, mapper, some.points, some.rows, measured, tuple(held_out), reach_m)


def _judged(
    name: str, scale: Scale, columns: Columns, learned: Learned[_Column], labels: Ints, known: Ints, measured: Floats
) -> QuantityMethod:
    """Calibrate on the held-out errors, and go back to the quantity's own unit; a fold is scored with factors of the others."""
    from texture.predict import METHODS

    predicted, low, high = np.full((3, measured.size), np.nan)
    if not METHODS[name].has_variance:
        predicted[known] = scale.back(columns.mean[:, 0])
        return QuantityMethod(name, predicted, low, high, plain_scores(measured, predicted, low, high))
    value = learned.treatment.columns(learned.observations)[0]
    variance = columns.sample_variance
    factor = calibration_factors(columns.mean, variance, value, value)[0]
    wide = columns.scaled(out_of_fold_factors(columns.mean, variance, value, value, labels))
    middle, spread = wide.mean[:, 0], NORMAL_95 * np.sqrt(wide.sample_variance[:, 0])
    predicted[known] = scale.expected(middle, wide.variance[:, 0])
    low[known], high[known] = scale.back(middle - spread), scale.back(middle + spread)
    scores = plain_scores(measured, predicted, low, high)
    return QuantityMethod(name, predicted, low, high, scores, float(factor))


def map_quantities(
    models: tuple[QuantityModel, ...], target: Target, plane: Plane, per_side: int, progress: Progress
) -> tuple[QuantityMap, ...]:
    """Estimate every quantity in every active cell, on the support of the composition: the mean over points inside the cell."""
    if not models:
        return ()
    with progress.stage("further numbers", total=len(models) * int(target.active.sum())) as advance:
        return tuple(_map(model, target, plane, per_side, advance) for model in models)


def _map(
    model: QuantityModel, target: Target, plane: Plane, per_side: int, advance: Callable[[int], None]
) -> QuantityMap:
    mapper, scale, cells = model.mapper, model.scale, np.flatnonzero(target.active)
    mean, evidence = np.full(target.n_cells, np.nan), np.zeros(target.n_cells, dtype=np.int8)
    quantiles = np.full((len(QUANTILES), target.n_cells), np.nan)
    normal = np.array([-NORMAL_95, 0.0, NORMAL_95])[:, None]
    apart_m, zones = sampling_distance_m(model.points), mapper.zones
    for start in range(0, cells.size, CELLS_AT_ONCE):
        some = cells[start : start + CELLS_AT_ONCE]
        points = cell_points(target, some, per_side, plane.to_metres)
        share = None if zones is None else zones.cells.take(some)
        around = None if share is None else share.repeat(points.shape[1])
        m, v, rung, guessed = (
            a.reshape(points.shape[:2]) for a in mapper.predict_with_rung(points.reshape(-1, points.shape[-1]), around)
        )
        beyond = _beyond(model, points.mean(axis=1), share)
        evidence[some] = np.where(beyond, EXTRAPOLATED, SUPPORTED)
        fell_back = rung.max(axis=1) > 0
        evidence[some[fell_back | guessed.any(axis=1)]] = WIDER
        if mapper.has_variance:
            mean[some] = scale.expected(m, v).mean(axis=1)
            middle, whole = m.mean(axis=1), v.mean(axis=1)
            averaging = averaged_out(np.sqrt(np.nan_to_num(target.area_m2[some])), apart_m)
            within = np.minimum(whole, mapper.small_scale[0] * averaging)
            quantiles[:, some] = scale.expected(middle + normal * np.sqrt(whole - within), within)
        else:
            mean[some] = scale.back(m).mean(axis=1)
        if mapper.has_radius:
            mean[some[fell_back]], quantiles[:, some[fell_back]] = np.nan, np.nan
        advance(some.size)
    return QuantityMap(model, mean, quantiles, evidence)


def _beyond(model: QuantityModel, centre: Floats, share: Share | None) -> NDArray[np.bool_]:
    """Cells that no station reaches which knows the quantity and speaks in their zone."""
    zones = model.mapper.zones
    if zones is None or share is None:
        return beyond_reach(centre, model.points, model.reach_m)
    beyond = zones.is_given(share)
    for number in np.unique(share.zone[~beyond]).tolist():
        some, speak = (share.zone == number) & ~beyond, zones.heard(number, model.rows)
        beyond[some] = beyond_reach(centre[some], model.points[speak], model.reach_m) if speak.any() else True
    return beyond
