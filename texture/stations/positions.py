"""Where a sample was taken: degrees in any notation, or metres in a stated system, to WGS 84 degrees."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from texture.errors import RecipeError
from texture.stations.angles import angle_digits, parse_angle
from texture.stations.cells import read_numbers, usual_decimals
from texture.stations.files import Cell, is_blank
from texture.stations.where import Where, shown

__all__ = ["Positions", "from_metres", "from_zones", "is_projected", "read_degrees"]

FloatArray = npt.NDArray[np.float64]
_PLAIN = re.compile(r"\s*[+\-−]?\d{1,3}(?:[.,]\d*)?\s*|\s*-?\d{4,}(?:[.,]\d*)?\s*")
METRES_PER_DEGREE = 111_195.0  # along a great circle of the mean earth radius; accuracy needs no more


@dataclass(frozen=True)
class Positions:
    """Longitude and latitude of WGS 84 and what the digits given are worth.

    Parameters
    ----------
    longitude, latitude : float array, shape (n,), degrees
        NaN where there is no position.
    accuracy_m : float array, shape (n,), metres
        Half of the last digit's step, the larger of the two directions.
    problem : object array of str, shape (n,)
        Why there is no position; empty where there is one.
    notes : tuple of str
    """

    longitude: FloatArray
    latitude: FloatArray
    accuracy_m: FloatArray
    problem: npt.NDArray[np.object_]
    notes: tuple[str, ...] = ()


def read_degrees(
    longitude: Sequence[Cell],
    latitude: Sequence[Cell],
    where: tuple[Where, Where],
    rows: Sequence[int],
    crs: str | None = None,
    hemisphere: str = "",
) -> Positions:
    """Read columns of longitude and latitude in degrees.

    Parameters
    ----------
    longitude, latitude : sequence of cells
    where : (Where, Where)
        Places of the two columns.
    rows : sequence of int
    crs : str, optional
        Geographic system of the degrees; WGS 84 if absent.
    hemisphere : str, default ""
        Letters of the halves of the globe in which unsigned degrees lie: "W" makes 3.2 to 3.2 degrees west.

    Raises
    ------
    SampleError
        If most values are far beyond degrees: metres given as degrees.
    RecipeError
        If `crs` is unknown or in metres.
    """
    lon, lon_half, lon_problem = _angles(longitude, "longitude", where[0], rows)
    lat, lat_half, lat_problem = _angles(latitude, "latitude", where[1], rows)
    accuracy = _accuracy_m(lon_half, lat_half, lat)
    if "W" in hemisphere:
        lon = np.where(_bare(longitude), -lon, lon)
    if "S" in hemisphere:
        lat = np.where(_bare(latitude), -lat, lat)
    problem = np.where(lat_problem != "", lat_problem, lon_problem)
    notes: tuple[str, ...] = ()
    if crs is not None:
        system = _system(crs)
        if system.is_projected:
            raise RecipeError(
                f'{where[0].text()}: the recipe says crs = "{crs}", which is in metres, but the column holds degrees; '
                "take crs out, or name easting and northing in columns"
            )
        lon, lat, notes = _transform(lon, lat, system, where[0].file)
    lon = np.where(lon > 180.0, lon - 360.0, lon)
    lost = np.isnan(lon) | np.isnan(lat)
    problem = np.where(lost & (problem == ""), "no position", problem)
    zero = ~lost & (lon == 0.0) & (lat == 0.0)
    problem = np.where(zero, "position 0, 0, which stands for none", problem)
    lost |= zero
    return _positions(lon, lat, accuracy, problem, lost, notes)


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
    if known.any() and in_degrees.sum() > known.sum() / 2 and (crs is None or _system(crs).is_projected):
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
    system = _system(crs)
    lon, lat, notes = _transform(
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
    return _positions(lon, lat, accuracy, problem, lost, notes)


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


def is_projected(crs: str) -> bool:
    """Whether a coordinate system is one of metres (or feet) rather than degrees; RecipeError if it is unknown."""
    return bool(_system(crs).is_projected)


def _positions(
    lon: FloatArray,
    lat: FloatArray,
    accuracy: FloatArray,
    problem: npt.NDArray[np.object_],
    lost: npt.NDArray[np.bool_],
    notes: tuple[str, ...],
) -> Positions:
    nan = np.nan
    return Positions(
        np.where(lost, nan, lon),
        np.where(lost, nan, lat),
        np.where(lost, nan, accuracy),
        np.where(lost, problem, "").astype(object),
        notes,
    )


def _angles(
    cells: Sequence[Cell], axis: str, where: Where, rows: Sequence[int]
) -> tuple[FloatArray, FloatArray, npt.NDArray[np.object_]]:
    """Degrees, half steps in degrees and problems of one column."""
    n = len(cells)
    value, half = np.full(n, np.nan), np.full(n, np.nan)
    problem = np.full(n, "", dtype=object)
    plain = [i for i, c in enumerate(cells) if _is_plain(c)]
    if plain:
        numbers = read_numbers([cells[i] for i in plain], where, [rows[i] for i in plain])
        value[plain], half[plain] = numbers.value, numbers.half_width
    limit = 90.0 if axis == "latitude" else 360.0
    outside = np.abs(value) > limit
    if outside.sum() > 0.5 * np.isfinite(value).sum():
        i = int(np.argmax(outside))
        raise where.error(
            shown(float(value[i])),
            f"degrees of {axis}, at most {limit:g}",
            "these look like metres: name easting and northing in columns and give the file's crs",
            row=rows[i],
        )
    for i in map(int, np.flatnonzero(outside)):
        problem[i] = f"{axis} {value[i]:.10g} is no {axis}: more than {limit:g} degrees"
    value[outside] = np.nan
    fields: dict[int, tuple[int, ...]] = {}
    done = set(plain)
    for i, cell in enumerate(cells):
        if i in done or is_blank(cell):
            continue
        if not isinstance(cell, str):
            problem[i] = f"{axis} {shown(cell)} is no {axis}"
            continue
        try:
            value[i], half[i] = parse_angle(cell, axis)
        except ValueError as error:
            problem[i] = str(error)
        else:
            fields[i] = angle_digits(cell)
    _usual_steps(half, fields)
    return value, half, problem


def _bare(cells: Sequence[Cell]) -> npt.NDArray[np.bool_]:
    """Whether a cell carries neither a sign nor a letter."""
    return np.array(
        [
            c > 0
            if isinstance(c, (int, float))
            else isinstance(c, str) and not re.search(r"[+\-−]\s*\d|[nsewo]", c, re.I)
            for c in cells
        ],
        dtype=bool,
    )


def _is_plain(cell: Cell) -> bool:
    kind = type(cell)
    return kind is float or kind is int or (kind is str and _PLAIN.fullmatch(cell) is not None)  # type: ignore[call-overload]


def _usual_steps(half: FloatArray, fields: dict[int, tuple[int, ...]]) -> None:
    """Give positions with dropped trailing zeros the step of their column."""
    for count in {f[0] for f in fields.values()}:
        members = [i for i, f in fields.items() if f[0] == count]
        decimals = np.array([fields[i][1] for i in members], dtype=np.int16)
        usual = usual_decimals(decimals)
        half[members] *= 10.0 ** -(np.maximum(decimals, usual) - decimals).astype(np.float64)


def _accuracy_m(lon_half: FloatArray, lat_half: FloatArray, latitude: FloatArray) -> FloatArray:
    shrink = np.cos(np.radians(np.clip(latitude, -90.0, 90.0)))
    return np.maximum(lat_half, lon_half * shrink) * METRES_PER_DEGREE


def _step(values: FloatArray) -> float:
    """Largest power of ten, from 1, that nearly all values are multiples of."""
    step = 1.0
    if not len(values):
        return step
    while step < 10_000.0 and np.mean(np.abs(values / (10 * step) - np.round(values / (10 * step))) < 1e-9) > 0.95:
        step *= 10.0
    return step if step > 1.0 else 0.0


def _system(crs: str):  # type: ignore[no-untyped-def]
    import pyproj

    try:
        return pyproj.CRS.from_user_input(crs)
    except pyproj.exceptions.CRSError as error:
        raise RecipeError(
            f'samples: crs = "{crs}" is no known coordinate system; give an EPSG code such as "EPSG:32630" or WKT'
        ) from error


def _transform(x: FloatArray, y: FloatArray, system, file: str) -> tuple[FloatArray, FloatArray, tuple[str, ...]]:  # type: ignore[no-untyped-def]
    import pyproj

    target = pyproj.CRS.from_epsg(4326)
    if system == target:
        return x, y, ()
    transformer = pyproj.Transformer.from_crs(system, target, always_xy=True)
    lon, lat = transformer.transform(x, y)
    lon, lat = np.asarray(lon, dtype=np.float64), np.asarray(lat, dtype=np.float64)
    bad = ~(np.isfinite(lon) & np.isfinite(lat))
    lon[bad] = lat[bad] = np.nan
    how = transformer.description or "several operations"
    note = f"{file}: positions from {system.name} to WGS 84 by {how}"
    if "ballpark" in how.casefold():
        note += "; the shift between the two datums is not known here, positions may be off by up to 200 m"
    return lon, lat, (note,)


def _check_area(  # type: ignore[no-untyped-def]
    lon: FloatArray,
    lat: FloatArray,
    known: npt.NDArray[np.bool_],
    system,
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
