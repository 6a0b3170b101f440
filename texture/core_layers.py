"""Layers of the bed from cores: what each core found in a layer, and how far the layer differs from the map because of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import RecipeError

if TYPE_CHECKING:
    from texture.bed import CoreLayer
    from texture.recipe import Bed, Recipe
    from texture.result import Validated
    from texture.stations import Stations

__all__ = ["Cores", "check_cores", "core_layers", "cores_in", "layer_depths"]

Floats = NDArray[np.float64]
CELLS_AT_ONCE = 100_000


@dataclass(frozen=True, eq=False)
class Cores:
    """What cores found between two depths, one row for each place.

    Attributes
    ----------
    longitude, latitude : float arrays, shape (c,)
    fractions : float array, shape (c, 3)
        Mud, sand, gravel: mean of the intervals by the length that lies between the depths. Sand and gravel are NaN where the
        core knows only its mud.
    covered : float array, shape (c,)
        Share of the way between the depths that the intervals cover.
    """

    longitude: Floats
    latitude: Floats
    fractions: Floats
    covered: Floats


def layer_depths(settings: Bed) -> Floats:
    """Top and bottom of each layer in metres below the bed, shape (layers, 2)."""
    bottom = np.cumsum([layer.thickness_m for layer in settings.layers])
    return np.column_stack([np.concatenate([[0.0], bottom[:-1]]), bottom])


def cores_in(stations: Stations, top_m: float, bottom_m: float) -> Cores:
    """Gather what the intervals of cores hold between two depths.

    Rows at one place are one core. Intervals without an end, without fractions (told in words) or that know only mud : sand do
    not count, and those that know only mud count in cores that have nothing better.
    """
    table = stations.deeper
    names = ["longitude", "latitude", "top_m", "bottom_m", "mud", "sand", "gravel"]
    x, y, top, bottom, *parts = (table[name].to_numpy(dtype=np.float64) for name in names)
    fractions = np.column_stack(parts)
    length = np.minimum(bottom, bottom_m) - np.maximum(top, top_m)
    whole = np.isfinite(fractions).all(axis=1)
    only_mud = np.isfinite(fractions[:, 0]) & np.isnan(fractions[:, 1:]).all(axis=1)
    # A hair's breadth is the rounding of depths, not a sample.
    usable = np.isfinite(x) & np.isfinite(y) & (length > 1e-6) & (whole | only_mud)
    places, core = np.unique(np.column_stack([x, y])[usable], axis=0, return_inverse=True)
    core, length, fractions, whole = core.ravel(), length[usable], fractions[usable], whole[usable]
    has_whole = np.bincount(core[whole], minlength=len(places)) > 0
    length = np.where(whole | ~has_whole[core], length, 0.0)
    total = np.bincount(core, length, minlength=len(places))
    mean: Floats = np.full((len(places), 3), np.nan)
    for k, column in enumerate(np.nan_to_num(fractions).T):
        amount = np.bincount(core, length * column, minlength=len(places))
        np.divide(amount, total, out=mean[:, k], where=total > 0.0)
    mean[~has_whole, 1:] = np.nan
    mean[has_whole] /= mean[has_whole].sum(axis=1, keepdims=True)  # rounded percent of a sheet
    covered = np.minimum(total / (bottom_m - top_m), 1.0)
    return Cores(places[:, 0], places[:, 1], mean, covered)


def check_cores(recipe: Recipe, stations: Stations) -> None:
    """Refuse a layer to be filled from cores that no core reaches; raises `RecipeError`."""
    depths = layer_depths(recipe.bed)
    for i, layer in enumerate(recipe.bed.layers):
        if layer.fill == "cores" and cores_in(stations, *depths[i]).covered.size == 0:
            bottoms = stations.deeper["bottom_m"].to_numpy(dtype=np.float64)
            bottoms = bottoms[np.isfinite(bottoms)]
            found = (
                f"the deepest interval of a core ends at {bottoms.max():g} m"
                if bottoms.size
                else f"no sample lies below intake.surface_m = {recipe.intake.surface_m:g} m"
            )
            raise RecipeError(
                f'bed.layers[{i}].fill = "cores": no core tells mud, sand and gravel of {depths[i, 0]:g} to {depths[i, 1]:g} m below '
                f'the bed; {found}; expected at least one; use fill = "same" or a composition'
            )


def core_layers(found: Validated) -> Mapping[int, CoreLayer]:
    """Krige how layers differ from the map, by the number of the layer from 0; empty where none is filled from cores.

    At each core the difference is what it found less the map there, in log-ratio coordinates; between cores it is kriged with
    a known mean of 0 and the structure that was fitted to each coordinate of the surface, so that it fades to 0, the map itself,
    within the range. In zones with a hard edge only the cores inside are heard. Cells are sampled up to the distance that
    cross-validation has tested.
    """
    depths = layer_depths(found.recipe.bed)
    return {
        i: _layer(found, cores_in(found.stations, *depths[i]))
        for i, layer in enumerate(found.recipe.bed.layers)
        if layer.fill == "cores"
    }


def _layer(found: Validated, cores: Cores) -> CoreLayer:
    from texture.bed import CoreLayer
    from texture.bed.cores import surface_coordinates
    from texture.predict import Kriging
    from texture.validation.reach import beyond_reach

    mapper, target, logratio = found.mapper, found.target, found.mapper.logratio
    zones, d, median = mapper.zones, mapper.logratio.n_coordinates, found.recipe.method.estimate == "median"
    here = found.plane.to_metres(cores.longitude, cores.latitude)
    share = None if zones is None else zones.at(cores.longitude, cores.latitude)
    mean, variance = mapper.predict(here, share)
    surface = mapper.impose(mapper.back(mean) if median else mapper.expected(mean, variance), share)
    difference = logratio.forward(cores.fractions) - surface_coordinates(surface, logratio)
    columns = [replace(c, survey=0.0) for c in list(mapper.structure)[:d]]  # of one core a survey's offset is not known
    stations = mapper.space.at(here).points
    shift, sampled = np.zeros((target.n_cells, d)), np.zeros(target.n_cells, dtype=bool)
    for number in range(1 if zones is None else len(zones.settings) + 1):
        heard, wet = np.ones(len(here), dtype=bool), target.active
        if zones is not None and share is not None:
            heard, wet = zones.hears(number, share.zone), wet & (zones.cells.zone == number)
        cells = np.flatnonzero(wet)
        if not cells.size or not heard.any():
            continue
        knows = [heard & np.isfinite(column) for column in difference.T]
        kriged = {
            k: Kriging(columns[k], mean=0.0).fit(stations[some], difference[some, k])
            for k, some in enumerate(knows)
            if some.any()
        }
        for start in range(0, cells.size, CELLS_AT_ONCE):
            some = cells[start : start + CELLS_AT_ONCE]
            places = found.plane.to_metres(target.longitude[some], target.latitude[some])
            seen = mapper.space.at(places).points
            for k, kriging in kriged.items():
                shift[some, k] = kriging.predict(seen)[0][:, 0]
            sampled[some] = ~beyond_reach(places, here[heard], found.reach_m)
    return CoreLayer(logratio, shift, sampled, len(here), float(cores.covered.mean()))
