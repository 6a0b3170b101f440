"""Where a sample was taken: degrees in any notation, or metres in a stated system, to WGS 84 degrees."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from texture.errors import RecipeError
from texture.stations.angles import angle_digits, parse_angle
from texture.stations.cells import read_numbers, usual_decimals
from texture.stations.files import Cell, is_blank
from texture.stations.halves import o_in
from texture.stations.where import Where, shown

if TYPE_CHECKING:
    import pyproj

__all__ = ["Positions", "find_system", "is_projected", "placed", "read_degrees", "to_wgs84"]

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
    minutes: bool = False,
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
    minutes : bool, default False
        Whether plain numbers are degrees and minutes, 54.30 half a degree above 54.

    Raises
    ------
    SampleError
        If most values are far beyond degrees: metres given as degrees.
    RecipeError
        If `crs` is unknown or in metres.
    """
    o_is = next((x for x in "WE" if x in hemisphere), o_in(where[0].column))
    lon, lon_half, lon_problem = _angles(longitude, "longitude", where[0], rows, minutes, o_is)
    lat, lat_half, lat_problem = _angles(latitude, "latitude", where[1], rows, minutes)
    accuracy = _accuracy_m(lon_half, lat_half, lat)
    if "W" in hemisphere:
        lon = np.where(_bare(longitude), -lon, lon)
    if "S" in hemisphere:
        lat = np.where(_bare(latitude), -lat, lat)
    problem = np.where(lat_problem != "", lat_problem, lon_problem)
    notes: tuple[str, ...] = ()
    if crs is not None:
        system = find_system(crs)
        if system.is_projected:
            raise RecipeError(
                f'{where[0].text()}: the recipe says crs = "{crs}", which is in metres, but the column holds degrees; '
                "take crs out, or name easting and northing in columns"
            )
        lon, lat, notes = to_wgs84(lon, lat, system, where[0].file)
    lon = np.where(lon > 180.0, lon - 360.0, lon)
    lost = np.isnan(lon) | np.isnan(lat)
    problem = np.where(lost & (problem == ""), "no position", problem)
    zero = ~lost & (lon == 0.0) & (lat == 0.0)
    problem = np.where(zero, "position 0, 0, which stands for none", problem)
    lost |= zero
    return placed(lon, lat, accuracy, problem, lost, notes)


def is_projected(crs: str) -> bool:
    """Whether a coordinate system is one of metres (or feet) rather than degrees; RecipeError if it is unknown."""
    return bool(find_system(crs).is_projected)


def placed(
    lon: FloatArray,
    lat: FloatArray,
    accuracy: FloatArray,
    problem: npt.NDArray[np.object_],
    lost: npt.NDArray[np.bool_],
    notes: tuple[str, ...],
) -> Positions:
    """Return positions with everything blanked where they are lost."""
    nan = np.nan
    return Positions(
        np.where(lost, nan, lon),
        np.where(lost, nan, lat),
        np.where(lost, nan, accuracy),
        np.where(lost, problem, "").astype(object),
        notes,
    )


def _angles(
    cells: Sequence[Cell], axis: str, where: Where, rows: Sequence[int], minutes: bool = False, o_is: str = ""
) -> tuple[FloatArray, FloatArray, npt.NDArray[np.object_]]:
    """Degrees, half steps in degrees and problems of one column."""
    n = len(cells)
    value, half = np.full(n, np.nan), np.full(n, np.nan)
    problem = np.full(n, "", dtype=object)
    plain = [i for i, c in enumerate(cells) if _is_plain(c)]
    if plain:
        numbers = read_numbers([cells[i] for i in plain], where, [rows[i] for i in plain])
        value[plain], half[plain] = numbers.value, numbers.half_width
        if minutes:
            whole = np.trunc(value)
            beyond = np.abs(value - whole) >= 0.6 - 1e-9
            for i in map(int, np.flatnonzero(beyond)):
                problem[i] = f'{axis} {value[i]:.10g}: minutes of 60 or more, and the recipe says degrees = "minutes"'
            value, half = np.where(beyond, np.nan, whole + (value - whole) / 0.6), half / 0.6
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
            value[i], half[i] = parse_angle(cell, axis, o_is)
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


def find_system(crs: str) -> pyproj.CRS:
    """Return the coordinate system that a recipe names; RecipeError if it is unknown."""
    import pyproj

    try:
        return pyproj.CRS.from_user_input(crs)
    except pyproj.exceptions.CRSError as error:
        raise RecipeError(
            f'samples: crs = "{crs}" is no known coordinate system; give an EPSG code such as "EPSG:32630" or WKT'
        ) from error


def to_wgs84(
    x: FloatArray, y: FloatArray, system: pyproj.CRS, file: str
) -> tuple[FloatArray, FloatArray, tuple[str, ...]]:
    """Transform to longitude and latitude of WGS 84; a note tells the operation, and aloud where the datum shift is unknown."""
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
