"""The spaces that a recipe's methods work in: covariates read, ways through water found, each once and before any fold."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import RecipeError
from texture.space import PLANE, Covariates, Field, Grid, Layer, Space
from texture.space.fields import MISSING
from texture.space.in_water import Apart, InWater
from texture.space.lattice import Lattice
from texture.targets.covariates import read_covariate, target_depth
from texture.targets.water import knows_land, water_on

if TYPE_CHECKING:
    from texture.observations import Observations
    from texture.recipe import Covariate, Recipe
    from texture.structure.plane import Plane
    from texture.targets import Target

__all__ = ["Spaces", "make_spaces", "missing_note"]

Floats = NDArray[np.float64]
LEAST_STATIONS = 5  # with all covariates, as many as any map needs


def make_spaces(recipe: Recipe, target: Target, plane: Plane, observations: Observations) -> Mapping[str, Space]:
    """The space of the recipe's method and of each that it is compared with, by the method's name.

    Raises
    ------
    TargetError, StructureError
        A covariate that cannot be read, does not vary, or has no value at the stations.
    """
    from texture.predict import METHODS

    maker = Spaces(recipe, target, plane, observations)
    found: dict[str, Space] = {}
    for name in recipe.methods:
        method = METHODS[name]
        if method.distance == "in_water":
            found[name] = maker.in_water
        elif method.distance == "with_covariates":
            found[name] = maker.with_covariates
        else:
            given = bool(recipe.method.covariates or recipe.method.drift)  # a forest can do without
            found[name] = maker.with_drift if method.drift and given else PLANE
    return found


class Spaces:
    """Makes each space when it is first asked for, from what they share."""

    def __init__(self, recipe: Recipe, target: Target, plane: Plane, observations: Observations) -> None:
        self.recipe, self.target, self.plane, self.stations = recipe, target, plane, observations.points

    @cached_property
    def cells(self) -> Floats:
        """Water cells in the plane."""
        wet = self.target.active
        return self.plane.to_metres(self.target.longitude[wet], self.target.latitude[wet])

    @cached_property
    def lattice(self) -> tuple[Lattice, NDArray[np.bool_]]:
        """A lattice over stations and cells as fine as the cells, and which of its nodes are water."""
        everything = np.concatenate([self.stations, self.cells])
        side = float(np.sqrt(np.median(self.target.area_m2[self.target.active])))
        if self.target.corners is None:  # places have no size
            side = float(np.hypot(*np.ptp(everything, axis=0))) / 400.0
        lattice = Lattice.covering(everything, side)
        return lattice, water_on(lattice, self.target, self.plane.to_metres, self.plane.to_degrees)

    @cached_property
    def covariates(self) -> Covariates:
        """All covariates of the recipe, standardised at the stations."""
        layers = [Layer(c.name, self._field(c), c.transform) for c in self.recipe.method.covariates]
        return Covariates(layers).frozen_at(self.stations)

    def _field(self, settings: Covariate) -> Field:
        if settings.file is not None:
            wanted = np.concatenate([self.stations, self.cells])
            return read_covariate(settings, self.target, wanted, self.plane.to_metres, self.plane.to_degrees)
        if settings.name == "depth":
            return target_depth(self.target, self.plane.to_metres, self.plane.to_degrees)
        return self._shore_distance()

    def _shore_distance(self) -> Field:
        """Distance to the nearest shore: a straight line to it meets no other land, so it is also the way through water."""
        from scipy.ndimage import distance_transform_edt

        if self.plane.dimensions != 2:
            raise RecipeError(
                'covariate "shore_distance": the map is too wide for a plane; give the distance as a file'
            )
        if not knows_land(self.target):
            raise RecipeError(
                f'covariate "shore_distance": {self.target.name} knows no land; give target.land or a mask, or the distance as a file'
            )
        lattice, wet = self.lattice
        if wet.all():
            raise RecipeError(
                f'covariate "shore_distance": no land lies within the map of {self.target.name}; leave it out'
            )
        away = distance_transform_edt(wet.reshape(lattice.shape)) * lattice.step_m
        # The shore runs half-way between the last dry node and the first wet one.
        return Grid(lattice.x, lattice.y, np.maximum(away - 0.5 * lattice.step_m, 0.0))

    @cached_property
    def with_covariates(self) -> Space:
        """The plane, and every covariate beside it."""
        return self._told(Space(axes=self.covariates))

    @cached_property
    def with_drift(self) -> Space:
        """The plane, with the recipe's drift or all covariates as what the mean follows."""
        method = self.recipe.method
        names = method.drift or tuple(c.name for c in method.covariates)
        own = [n for n in names if n not in ("x", "y")]
        if len(own) < len(names) and self.plane.dimensions != 2:
            raise RecipeError('method.drift: "x" and "y" need a plane, and the map is too wide for one')
        return self._told(Space(drift=names, columns=self.covariates.take(own) if own else None))

    def _told(self, space: Space) -> Space:
        """The space with notes on places that lack a covariate."""
        from dataclasses import replace

        used = space.axes or space.columns
        if used is None:
            return space
        notes = []
        for layer in used.layers:
            at_stations, at_cells = (layer.field.at(p)[1] == MISSING for p in (self.stations, self.cells))
            note = missing_note(
                layer.name, int(at_stations.sum()), at_stations.size, int(at_cells.sum()), at_cells.size
            )
            notes += [note] if note else []
        left = int((~used.at(self.stations)[1]).sum())
        if left < LEAST_STATIONS:
            raise RecipeError(
                f"method.covariates: {left} stations have a value of all of {', '.join(used.names)}, expected at least {LEAST_STATIONS}"
            )
        return replace(space, notes=tuple(notes))

    @cached_property
    def in_water(self) -> Space:
        """Ways through the largest water laid out, or the plane with a note that says why not."""
        why = ""
        if self.plane.dimensions != 2:
            why = "the map is too wide for a plane"
        elif not knows_land(self.target):
            why = f"{self.target.name} knows no land"
        else:
            lattice, wet = self.lattice
            if wet.all():
                why = "no land lies within the map"
            else:
                found = InWater.lay_out(lattice, wet, self.cells)
                if isinstance(found, Apart):
                    why = (
                        f"the water is not connected (on a lattice of {lattice.step_m:,.0f} m, {found.places:,} of {found.of:,} "
                        "cells lie off the largest part)"
                    )
                else:
                    off, cells_off = found.apart(self.stations), int(found.apart(self.cells).sum())
                    if (~off).sum() >= LEAST_STATIONS:
                        told = apart_note(int(off.sum()), off.size, cells_off, len(self.cells))
                        return Space(ground=found, notes=(str(found), told) if told else (str(found),))
                    why = f"{int((~off).sum())} of {off.size:,} stations lie in the largest water"
        why = f"distance through water: {why}; distance in the plane is taken instead"
        return Space(notes=(why,), fell_back=why)


def apart_note(stations: int, all_stations: int, cells: int, all_cells: int) -> str:
    """Say how many stations and cells lie off the largest water and what is done; empty where none does.

    >>> apart_note(0, 9, 3, 1200)
    'distance through water: 3 of 1,200 cells lie off the largest water: its nearest place stands in, and they are flagged as wider fall-back'
    """
    told = []
    if stations:
        told.append(
            f"{stations:,} of {all_stations:,} stations lie off the largest water and do not inform what is mapped through water"
        )
    if cells:
        told.append(
            f"{cells:,} of {all_cells:,} cells lie off the largest water: its nearest place stands in, and they are flagged as wider fall-back"
        )
    return f"distance through water: {'; '.join(told)}" if told else ""


def missing_note(name: str, stations: int, all_stations: int, cells: int, all_cells: int) -> str:
    """Say how many stations and cells lack a covariate and what is done; empty where none does."""
    told = []
    if stations:
        told.append(
            f"{stations:,} of {all_stations:,} stations have no value within one of its cells and do not inform the map"
        )
    if cells:
        told.append(
            f"{cells:,} of {all_cells:,} cells have none: the nearest value stands in, and they are flagged as wider fall-back"
        )
    return f'covariate "{name}": {"; ".join(told)}' if told else ""
