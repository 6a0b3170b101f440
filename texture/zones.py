"""Zones meet cells and stations: who stands in which, how much the zone has to say there, and what is given."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import RecipeError
from texture.predict.by_zone import FEWEST, ByZone, Region
from texture.recipe import Recipe, Zone

if TYPE_CHECKING:
    from texture.stations import Stations
    from texture.targets import Target

__all__ = ["Share", "Zones", "locate_zones", "zone_areas"]

Floats = NDArray[np.float64]
Ints = NDArray[np.integer]


@dataclass(frozen=True, eq=False)
class Share:
    """What zones have to say of some places.

    Attributes
    ----------
    zone : int array, shape (n,)
        Number of the zone from 1; 0 in none.
    weight : float array, shape (n,)
        1 inside a hard edge and in no zone; across a soft edge from 0 outside to 1 inside, a half on it.
    """

    zone: NDArray[np.int8]
    weight: NDArray[np.float32]

    def take(self, index: Ints) -> Share:
        """Return the shares of some of the places."""
        return Share(self.zone[index], self.weight[index])

    @classmethod
    def nowhere(cls, count: int) -> Share:
        """Of places in no zone."""
        return cls(np.zeros(count, dtype=np.int8), np.ones(count, dtype=np.float32))

    def layers(self) -> Iterator[tuple[int, Ints, Floats]]:
        """Zones that speak, in which of the places, and with what weight; the weights of a place sum to one.

        >>> [(n, i.tolist(), w.tolist()) for n, i, w in Share(np.array([0, 1]), np.array([1.0, 0.75])).layers()]
        [(0, [0, 1], [1.0, 0.25]), (1, [1], [0.75])]
        """
        own = np.where(self.zone > 0, self.weight, 1.0).astype(np.float64)
        around = np.flatnonzero((self.zone == 0) | (own < 1.0))
        if around.size:
            yield 0, around, np.where(self.zone[around] == 0, 1.0, 1.0 - own[around])
        for number in np.unique(self.zone[self.zone > 0]).tolist():
            inside = np.flatnonzero(self.zone == number)
            yield number, inside, own[inside]

    def repeat(self, count: int) -> Share:
        """Repeat every place."""
        return Share(self.zone.repeat(count), self.weight.repeat(count))


@dataclass(frozen=True, eq=False)
class Zones:
    """The zones of a recipe on the cells of a target and at its stations.

    Attributes
    ----------
    settings : tuple of Zone
        Zone number i is `settings[i - 1]`.
    parts : tuple of str
    areas : tuple
        Geometries in longitude and latitude.
    cells : Share
        Of all cells of the target.
    stations : Share
        Of all rows of the stations table.
    """

    settings: tuple[Zone, ...]
    parts: tuple[str, ...]
    areas: tuple[Any, ...]
    cells: Share
    stations: Share

    @property
    def regions(self) -> list[Region]:
        """How each zone is predicted."""
        return [Region(z.kind, z.soft_edge_m == 0.0) for z in self.settings]

    @cached_property
    def given(self) -> Floats:
        """Composition of each zone number, NaN where none is given, shape (zones + 1, parts)."""
        table = np.full((len(self.settings) + 1, len(self.parts)), np.nan)
        for i, zone in enumerate(self.settings, start=1):
            if zone.composition is not None:
                table[i] = [zone.composition.get(part, 0.0) for part in self.parts]
        return table

    def is_given(self, share: Share) -> NDArray[np.bool_]:
        """Tell where the composition is the user's own for the most part."""
        return np.asarray(np.isfinite(self.given[share.zone, 0]) & (share.weight >= 0.5))

    def at(self, longitude: Floats, latitude: Floats) -> Share:
        """Find the zones of further places."""
        return _share(self.settings, self.areas, longitude, latitude)

    def impose(self, fractions: Floats, share: Share) -> Floats:
        """Put given compositions into fractions of shape (..., n, parts)."""
        some = np.flatnonzero(np.isfinite(self.given[share.zone, 0]))
        if some.size == 0:
            return fractions
        result, w = fractions.copy(), share.weight[some, None].astype(np.float64)
        blended = (1.0 - w) * result[..., some, :] + w * self.given[share.zone[some]]
        result[..., some, :] = np.where(w == 1.0, self.given[share.zone[some]], blended)
        return result

    def heard(self, number: int, rows: Ints) -> NDArray[np.bool_]:
        """Which of some rows of the stations table speak in a zone."""
        return self.hears(number, self.stations.zone[rows])

    def hears(self, number: int, zone: NDArray[np.int8]) -> NDArray[np.bool_]:
        """Which places, by the zones that they stand in, speak in a zone."""
        hard = np.array([False, *(r.hard for r in self.regions)])
        return np.asarray(~hard[zone] if number == 0 or self.regions[number - 1].kind == "given" else zone == number)

    def predictor(
        self, make: Any, sill: Floats | None, noise: Floats | None = None, survey: Floats | None = None
    ) -> ByZone:
        """Make an unfitted predictor for all zones together."""
        return ByZone(make, self.regions, sill, noise, survey)

    def lines(self, rows: Ints) -> list[str]:
        """Say what each zone is filled with, from the rows of the stations that are used."""
        said = []
        for i, zone in enumerate(self.settings, start=1):
            own = int((self.stations.zone[rows] == i).sum())
            edge = f"soft edge of {zone.soft_edge_m:g} m" if zone.soft_edge_m else "hard edge"
            how = {
                "given": "the given composition",
                "mean": "the mean of its stations",
                "stations": "its own stations",
            }[zone.kind]
            if zone.kind != "given" and own == 0:
                how = 'no station of its own: the mean of the whole map, flagged; give it kind = "given" and a composition'
            elif zone.kind == "stations" and own < FEWEST:
                how = f"fewer than {FEWEST} stations of its own: their mean, flagged"
            said.append(f"{zone.name}: {int((self.cells.zone == i).sum()):,} cells, {own} stations, {edge}; {how}")
        return said


def zone_areas(recipe: Recipe, target: Target) -> tuple[Any, ...]:
    """Read the geometry of every zone.

    Raises
    ------
    TargetError, RecipeError
        If a file cannot be used, or a zone covers no water cell.
    """
    from texture.targets.zones import numbered_area, polygon_area

    areas = []
    for zone in recipe.zones:
        key = f'zones "{zone.name}"'
        if zone.polygons is not None:
            areas.append(polygon_area(zone.polygons))
            continue
        path = zone.file or recipe.target.file
        if path is None or not _is_netcdf(path):
            raise RecipeError(f'{key}: variable = "{zone.variable}" needs file, a NetCDF file on the target\'s cells')
        assert zone.variable is not None  # the recipe has checked
        areas.append(numbered_area(path, zone.variable, zone.values, target, key))
    share = _share(recipe.zones, areas, target.longitude, target.latitude)
    for i, zone in enumerate(recipe.zones, start=1):
        if not (share.zone[target.active] == i).any():
            raise RecipeError(
                f'zones "{zone.name}": covers no water cell of {target.name} that an earlier zone does not have; '
                "check its polygons and their coordinate system"
            )
    return tuple(areas)


def locate_zones(recipe: Recipe, target: Target, stations: Stations) -> Zones | None:
    """Find the zone of every cell and station; None where the recipe has no zones."""
    if not recipe.zones:
        return None
    areas = zone_areas(recipe, target)
    places = (stations.table[name].to_numpy(dtype=np.float64) for name in ("longitude", "latitude"))
    return Zones(
        settings=recipe.zones,
        parts=recipe.composition.parts,
        areas=areas,
        cells=_share(recipe.zones, areas, target.longitude, target.latitude),
        stations=_share(recipe.zones, areas, *places),
    )


def _is_netcdf(path: Path) -> bool:
    return path.suffix.lower() not in {".tif", ".tiff", ".csv", ".txt", ".tsv", ".gpkg", ".geojson", ".json", ".shp"}


def _share(zones: Sequence[Zone], areas: Sequence[Any], longitude: Floats, latitude: Floats) -> Share:
    from texture.targets.zones import inside, way_in_m

    number, weight = np.zeros(longitude.size, dtype=np.int8), np.ones(longitude.size, dtype=np.float32)
    for i, area in enumerate(areas, start=1):
        number[(number == 0) & inside(area, longitude, latitude)] = i
    for i, (zone, area) in enumerate(zip(zones, areas, strict=True), start=1):
        if zone.soft_edge_m == 0.0:
            continue
        half = zone.soft_edge_m / 2.0
        way = way_in_m(area, longitude, latitude, half)
        band = (np.abs(way) < half) & ((number == i) | (number == 0))
        number[band] = i
        weight[band] = 0.5 * (1.0 + np.sin(0.5 * np.pi * way[band] / half))
    return Share(number, weight)
