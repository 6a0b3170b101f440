"""Positions in metres of a stated system, or of UTM zones named in a column, to WGS 84 degrees."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from texture.stations.cells import read_numbers
from texture.stations.files import Cell, is_blank
from texture.stations.positions import Positions, find_system, placed, to_wgs84
from texture.stations.where import Where, shown

if TYPE_CHECKING:
    pass

if TYPE_CHECKING:
    import pyproj

__all__ = ["from_metres", "from_zones"]

FloatArray = npt.NDArray[np.float64]


def from_metres(
    easting: Sequence[Cell],
    northing: Sequence[Cell],
    where: tuple[Where, Where],
    rows: Sequence[int],
    crs: str | None,
) -> Positions:
    """Read columns of easting and northing in the system `crs` and turn them to degrees.

    Raises
    ------
    SampleError
        If no system is given, if the values are degrees, or if most positions lie far outside the area for which
        the system is meant (wrong zone, or easting and northing swapped).
    RecipeError
        If `crs` is unknown.
    """
    x, y = (
        read_numbers(cells, place, rows, thousands=True)
        for cells, place in zip((easting, northing), where, strict=True)
    )
    known = np.isfinite(x.value) & np.isfinite(y.value)
    in_degrees = known & (np.abs(x.value) <= 360.0) & (np.abs(y.value) <= 90.0)
    if known.any() and in_degrees.sum() > known.sum() / 2 and (crs is None or find_system(crs).is_projected):
        i = int(np.argmax(in_degrees))
        raise where[0].error(
            f'{shown(x.value[i])} (and {shown(y.value[i])} in "{where[1].column}")',
            "metres",
            "these look like degrees: name them longitude and latitude in columns"
            + (f' and take crs = "{crs}" out' if crs else ""),
            row=rows[i],
        )
    if crs is None:
        raise where[0].error(
            "easting and northing without a coordinate system",
            "one",
            'add crs = "EPSG:…" to this file\'s samples block',
        )
    system = find_system(crs)
    lon, lat, notes = to_wgs84(
        np.where(known, x.value, np.nan), np.where(known, y.value, np.nan), system, where[0].file
    )
    _check_area(lon, lat, known, system, crs, where, x.value, y.value, rows)
    unit_m = system.axis_info[0].unit_conversion_factor or 1.0
    # Eastings typed to full hundreds carry no digits after the point; their common step tells.
    accuracy = np.maximum(x.half_width, y.half_width) * unit_m
    accuracy = np.where(
        known, np.maximum(accuracy, 0.5 * unit_m * min(_step(x.value[known]), _step(y.value[known]))), np.nan
    )
    lost = np.isnan(lon) | np.isnan(lat)
    blank = np.array([is_blank(a) and is_blank(b) for a, b in zip(easting, northing, strict=True)], dtype=bool)
    problem = np.where(lost, np.where(blank, "no position", "easting or northing cannot be read"), "").astype(object)
    return placed(lon, lat, accuracy, problem, lost, notes)


def from_zones(
    easting: Sequence[Cell],
    northing: Sequence[Cell],
    zone: Sequence[Cell],
    where: tuple[Where, Where],
    rows: Sequence[int],
    zone_where: Where,
) -> Positions:
    """Read easting and northing whose UTM zone (WGS 84) stands in a column: `31N`, `31 north`, `31U`.

    A letter other than N and S is a latitude band: C to M south, N to X north. A lone number does not tell the
    hemisphere, and `S` is both "south" and the band from 32° N to 40° N; both are refused.

    Raises
    ------
    SampleError
        If a zone cannot be told.
    """
    n = len(rows)
    nan = np.full(n, np.nan)
    found = Positions(nan.copy(), nan.copy(), nan.copy(), np.full(n, "no zone", dtype=object))
    notes: list[str] = []
    for text in dict.fromkeys(str(z).strip() for z in zone if not is_blank(z)):
        members = [i for i, z in enumerate(zone) if not is_blank(z) and str(z).strip() == text]
        match = re.fullmatch(
            r"(?:utm\s*)?(?:zone\s*)?(\d{1,2})\s*°?\s*(n|north|norte|s|south|sur|[c-hj-mp-rt-x])", text, re.I
        )
        number = int(match[1]) if match else 0
        if match is None or match[2].casefold() == "s" or not 1 <= number <= 60:
            raise zone_where.error(
                shown(text),
                "a UTM zone such as 31N or 31 south",
                'say crs = "EPSG:326.." (north) or "EPSG:327.." (south) for the file',
                row=rows[members[0]],
            )
        word = match[2].casefold()
        north = word in ("n", "north", "norte") or (len(word) == 1 and "p" <= word <= "x")
        part = from_metres(
            [easting[i] for i in members],
            [northing[i] for i in members],
            where,
            [rows[i] for i in members],
            f"EPSG:{(32600 if north else 32700) + number}",
        )
        for whole, piece in zip(
            (found.longitude, found.latitude, found.accuracy_m, found.problem),
            (part.longitude, part.latitude, part.accuracy_m, part.problem),
            strict=True,
        ):
            whole[members] = piece
        notes.extend(part.notes)
    return Positions(found.longitude, found.latitude, found.accuracy_m, found.problem, tuple(notes))


def _step(values: FloatArray) -> float:
    """Largest power of ten, from 1, that nearly all values are multiples of."""
    step = 1.0
    if not len(values):
        return step
    while step < 10_000.0 and np.mean(np.abs(values / (10 * step) - np.round(values / (10 * step))) < 1e-9) > 0.95:
        step *= 10.0
    return step if step > 1.0 else 0.0


def _check_area(
    lon: FloatArray,
    lat: FloatArray,
    known: npt.NDArray[np.bool_],
    system: pyproj.CRS,
    crs: str,
    where: tuple[Where, Where],
    x: FloatArray,
    y: FloatArray,
    rows: Sequence[int],
) -> None:
    area, margin = system.area_of_use, 5.0  # degrees; surveys reach into the neighbouring zone, not beyond it
    if area is None or not known.any():
        return
    west, east = area.west - margin, area.east + margin
    if area.west > area.east:
        east += 360.0
    turned = np.where(lon < west, lon + 360.0, lon)
    inside = (turned >= west) & (turned <= east) & (lat >= area.south - margin) & (lat <= area.north + margin)
    if (known & ~inside).sum() > known.sum() / 2:
        i = int(np.argmax(known & ~inside))
        raise where[0].error(
            f'{shown(float(x[i]))} (and {shown(float(y[i]))} in "{where[1].column}")',
            f"a position in {system.name}",
            f'crs = "{crs}" may be the wrong zone, or easting and northing are swapped',
            row=rows[i],
        )
