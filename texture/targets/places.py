"""A list of places from a text table or a vector file."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets.crs import read_crs, to_degrees, unwrapped
from texture.targets.land import on_land, read_land
from texture.targets.target import Target

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["VECTOR_SUFFIXES", "read_places"]

VECTOR_SUFFIXES = {".gpkg", ".geojson", ".json", ".shp"}
NAMES = {
    "x": ("longitude", "lon", "long", "easting", "x", "x_m"),
    "y": ("latitude", "lat", "northing", "y", "y_m"),
}
Floats = NDArray[np.float64]


def read_places(settings: TargetSettings) -> Target:
    """Read places from CSV (columns longitude and latitude, or x and y with `target.crs`) or a vector file.

    Raises
    ------
    TargetError
        For missing columns, positions that are no numbers, or metres without a coordinate system.
    """
    path = settings.file
    assert path is not None  # the caller has looked
    lon, lat = _from_vector(path) if path.suffix.lower() in VECTOR_SUFFIXES else _from_table(path, settings)
    longitude = unwrapped(lon)
    land = read_land(settings.land) if settings.land is not None else None
    active = np.ones(longitude.size, dtype=bool) if land is None else ~on_land(land, longitude, lat)
    return Target(
        kind="points",
        name=path.name,
        dims=("point",),
        shape=(longitude.size,),
        crs=read_crs("EPSG:4326", "target.crs"),
        longitude=longitude,
        latitude=lat,
        active=active,
        topology=None,
        corners=None,
        land=land,
        notes=("places have no area: masses are those of one square metre at each, and there are no GeoTIFFs",),
    )


def _from_vector(path: Path) -> tuple[Floats, Floats]:
    import geopandas
    import pyogrio

    try:
        frame = geopandas.read_file(path)
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, ValueError) as error:
        raise TargetError(f"{path.name}: cannot be read as points ({error})") from error
    frame = frame[frame.geometry.notna() & (frame.geom_type == "Point")]
    if frame.empty:
        raise TargetError(f"{path.name}: holds no point; expected the places to fill as points")
    if frame.crs is None:
        raise TargetError(f"{path.name}: does not say its coordinate system; store it with one")
    points = frame.to_crs(4326).geometry
    return points.x.to_numpy(dtype=np.float64), points.y.to_numpy(dtype=np.float64)


def _from_table(path: Path, settings: TargetSettings) -> tuple[Floats, Floats]:
    import pandas as pd

    try:
        table = pd.read_csv(path, sep=None, engine="python", encoding="utf-8-sig")
    except (pd.errors.ParserError, pd.errors.EmptyDataError, UnicodeDecodeError, ValueError) as error:
        raise TargetError(f"{path.name}: cannot be read as a table of places ({error})") from error
    x, y = (_column(table, axis, path.name) for axis in ("x", "y"))
    if settings.crs is not None:
        crs = read_crs(settings.crs, "target.crs")
        return (x, y) if crs.is_geographic else to_degrees(x, y, crs)
    if np.abs(y).max() > 90.0 or np.abs(x).max() > 360.0:
        raise TargetError(
            f"{path.name}: x reaches {np.abs(x).max():g} and y {np.abs(y).max():g}, too large for degrees; give target.crs"
        )
    return x, y


def _column(table: pd.DataFrame, axis: str, name: str) -> Floats:
    import pandas as pd

    by_name = {str(c).strip().lower(): c for c in table.columns}
    found = next((by_name[n] for n in NAMES[axis] if n in by_name), None)
    if found is None:
        raise TargetError(
            f"{name}: no column for {axis}; expected one of {', '.join(NAMES[axis])}, found {', '.join(map(str, table.columns))}"
        )
    values = np.asarray(pd.to_numeric(table[found], errors="coerce"), dtype=np.float64)
    bad = np.flatnonzero(~np.isfinite(values))
    if bad.size:
        raise TargetError(
            f'{name} row {bad[0] + 2}, column "{found}": found "{table[found].iloc[bad[0]]}", expected a number'
        )
    return values
