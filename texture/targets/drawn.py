"""Cells that a line or a polygon of the user's names, such as the edge that the rim starts from."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError

if TYPE_CHECKING:
    from texture.targets.target import Target

__all__ = ["drawn_cells"]

Bools = NDArray[np.bool_]


def drawn_cells(path: Path, target: Target) -> Bools:
    """Find the water cells that lines cross and polygons cover.

    Parameters
    ----------
    path : path
        Vector file (GeoJSON, GeoPackage, Shapefile) of lines, polygons or both, in a coordinate system that it
        states.
    target : Target

    Returns
    -------
    bool array, shape (n,)
        A line takes every cell that it touches; a polygon those whose centre lies in it.

    Raises
    ------
    TargetError
        If the file cannot be read, holds no line or polygon, does not state its coordinate system, or touches
        no water of the target; and for lines across a list of places, which have no sides.
    """
    import shapely

    lines, areas = _read(path)
    found = np.zeros(target.n_cells, dtype=bool)
    wet = np.flatnonzero(target.active)
    if areas is not None:
        shapely.prepare(areas)
        longitude = _beside(target.longitude[wet], areas)
        found[wet] = shapely.contains_xy(areas, longitude, target.latitude[wet])
    if lines is not None:
        found |= _crossed(lines, target, path.name)
    if not found.any():
        west, south, east, north = target.bounds
        raise TargetError(
            f"{path.name}: touches no water cell of {target.name}, which lies in longitude {west:.3f} to {east:.3f}, latitude "
            f"{south:.3f} to {north:.3f}; check its coordinate system"
        )
    return found


def _read(path: Path) -> tuple[Any, Any]:
    """Lines and polygons of a file, each joined into one geometry in longitude and latitude."""
    import geopandas
    import pyogrio
    import shapely

    try:
        frame = geopandas.read_file(path)
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, ValueError) as error:
        raise TargetError(f"{path.name}: cannot be read as lines or polygons ({error})") from error
    frame = frame[frame.geometry.notna()]
    lines = frame[frame.geom_type.isin(["LineString", "MultiLineString"])]
    areas = frame[frame.geom_type.isin(["Polygon", "MultiPolygon"])]
    if lines.empty and areas.empty:
        kinds = ", ".join(sorted(set(frame.geom_type))) or "nothing"
        raise TargetError(f"{path.name}: holds {kinds}; expected lines or polygons")
    if frame.crs is None:
        raise TargetError(f"{path.name}: does not say its coordinate system; store it with one")

    def joined(part: geopandas.GeoDataFrame) -> Any:
        if part.empty:
            return None
        return shapely.union_all(shapely.make_valid(part.to_crs(4326).geometry.to_numpy()))

    return joined(lines), joined(areas)


def _beside(longitude: NDArray[np.float64], geometry: Any) -> NDArray[np.float64]:
    """Longitudes written so that they lie within half a turn of the geometry's middle."""
    import shapely

    west, _, east, _ = shapely.bounds(geometry)
    middle = (west + east) / 2.0
    return np.asarray((longitude - middle + 180.0) % 360.0 - 180.0 + middle)


def _crossed(lines: Any, target: Target, name: str) -> Bools:
    import shapely

    if target.corners is None:
        raise TargetError(f"{name}: {target.name} is a list of places, which a line cannot cross; give a polygon")
    cell = target.cell_of_piece
    wet = np.flatnonzero(target.active[cell])
    lon, lat = target.corners.of(wet)
    lon = _beside(lon[:, :1], lines) + (lon - lon[:, :1] + 180.0) % 360.0 - 180.0  # a cell is not cut by the date line
    west, south, east, north = shapely.bounds(lines)
    near = (
        (lon.max(axis=1) >= west) & (lon.min(axis=1) <= east) & (lat.max(axis=1) >= south) & (lat.min(axis=1) <= north)
    )
    shapely.prepare(lines)
    touched = shapely.intersects(lines, shapely.polygons(np.stack([lon[near], lat[near]], axis=-1)))
    found = np.zeros(target.n_cells, dtype=bool)
    found[cell[wet[near][touched]]] = True
    return found
