"""Land polygons: reading them, and which points lie on them."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError

__all__ = ["on_land", "read_land"]


def read_land(path: Path) -> Any:
    """Read land polygons and join them into one geometry in longitude and latitude.

    Raises
    ------
    TargetError
        If the file is no vector file, holds no polygon, or does not say its coordinate system.
    """
    import geopandas
    import pyogrio
    import shapely

    try:
        frame = geopandas.read_file(path)
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, ValueError) as error:
        raise TargetError(f"{path.name}: cannot be read as polygons ({error})") from error
    frame = frame[frame.geometry.notna() & frame.geom_type.isin(["Polygon", "MultiPolygon"])]
    if frame.empty:
        raise TargetError(f"{path.name}: holds no polygon; expected land as polygons")
    if frame.crs is None:
        raise TargetError(f"{path.name}: does not say its coordinate system; store it with one")
    land = shapely.union_all(shapely.make_valid(frame.to_crs(4326).geometry.to_numpy()))
    shapely.prepare(land)
    return land


def on_land(land: Any, longitude: NDArray[np.float64], latitude: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Tell which points lie on land; a point without a position does not."""
    import shapely

    located = np.isfinite(longitude) & np.isfinite(latitude)
    inside = np.zeros(longitude.shape, dtype=bool)
    inside[located] = shapely.contains_xy(land, longitude[located], latitude[located])
    return inside
