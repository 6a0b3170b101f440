"""A raster from bounds, cell size and projection."""

from __future__ import annotations

import numpy as np
import pyproj
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets.land import on_land, read_land
from texture.targets.structured import Structured
from texture.targets.target import Target

__all__ = ["make_raster", "read_crs"]


def make_raster(settings: TargetSettings) -> Target:
    """Make a raster of square cells; rows run north to south, `x` and `y` are cell centres.

    Raises
    ------
    TargetError
        If the bounds are not a whole number of cells, or are degrees in a metric projection (or the
        other way round).
    """
    assert settings.bounds is not None  # the recipe has checked that the three come together
    assert settings.cell_size is not None
    assert settings.crs is not None
    west, south, east, north = settings.bounds
    size, crs = settings.cell_size, read_crs(settings.crs, "target.crs")
    _check_units(settings.bounds, crs, settings.crs)
    columns, rows = _whole(east - west, size, "east - west"), _whole(north - south, size, "north - south")
    x = np.asarray(west + (np.arange(columns) + 0.5) * size, dtype=np.float64)
    y = np.asarray(north - (np.arange(rows) + 0.5) * size, dtype=np.float64)
    to_geographic = pyproj.Transformer.from_crs(crs, 4326, always_xy=True)
    longitude, latitude = _transform_mesh(to_geographic, x, y)
    x_edges = np.asarray(west + np.arange(columns + 1) * size, dtype=np.float64)
    y_edges = np.asarray(north - np.arange(rows + 1) * size, dtype=np.float64)
    corners = _corners(to_geographic, x_edges, y_edges)
    land = read_land(settings.land) if settings.land is not None else None
    active = np.ones(rows * columns, dtype=bool) if land is None else ~on_land(land, longitude, latitude)
    return Target(
        kind="raster",
        name=f"raster {rows} × {columns} of {size:g}",
        dims=("y", "x"),
        shape=(rows, columns),
        crs=crs,
        longitude=longitude,
        latitude=latitude,
        active=active,
        topology=Structured((rows, columns)),
        corners=corners,
        x=x,
        y=y,
        land=land,
        inlet_width_m=None if settings.inlet_width_m == "auto" else settings.inlet_width_m,
        notes=() if land is not None else ("no land polygons given: every cell of the raster is taken as water",),
    )


def read_crs(text: str, key: str) -> pyproj.CRS:
    """Read a CRS from an EPSG code or WKT; `key` names the setting in the error."""
    try:
        return pyproj.CRS.from_user_input(text)
    except pyproj.exceptions.CRSError as error:
        raise TargetError(f'{key} = "{text}": not a known coordinate system; expected such as "EPSG:32633"') from error


def _check_units(bounds: tuple[float, float, float, float], crs: pyproj.CRS, text: str) -> None:
    degrees = max(abs(v) for v in bounds) <= 360.0
    if crs.is_geographic and not degrees:
        raise TargetError(
            f"target.bounds = {list(bounds)}: too large for degrees, but {text} is in degrees; "
            "give bounds in degrees or a projected crs"
        )
    if crs.is_projected and degrees:
        raise TargetError(
            f"target.bounds = {list(bounds)}: these look like degrees, but {text} is in metres; "
            'give bounds in metres, or crs = "EPSG:4326"'
        )


def _whole(extent: float, size: float, label: str) -> int:
    count = round(extent / size)
    if count < 1 or abs(count * size - extent) > 1e-6 * size:  # a typed bound is exact to far better than this
        raise TargetError(
            f"target.bounds: {label} = {extent:g} is {extent / size:.3f} cells of {size:g}; expected a whole number"
        )
    return count


def _transform_mesh(
    transformer: pyproj.Transformer, x: NDArray[np.float64], y: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    mesh_x, mesh_y = np.meshgrid(x, y)
    longitude, latitude = transformer.transform(mesh_x.ravel(), mesh_y.ravel())
    return np.asarray(longitude), np.asarray(latitude)


def _corners(
    transformer: pyproj.Transformer, x: NDArray[np.float64], y: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Corners of each cell from the shared vertices, counter-clockwise from the south-west."""
    shape = (y.size, x.size)
    longitude, latitude = (a.reshape(shape) for a in _transform_mesh(transformer, x, y))
    return corner_table(longitude, upward=False), corner_table(latitude, upward=False)


def corner_table(vertices: NDArray[np.float64], upward: bool) -> NDArray[np.float64]:
    """Turn shared vertices, shape (rows + 1, columns + 1), into corners, shape (rows * columns, 4).

    `upward` tells whether rows run from south to north, which decides the order that is
    counter-clockwise.
    """
    lower, upper = (vertices[:-1], vertices[1:]) if upward else (vertices[1:], vertices[:-1])
    corners = np.stack([lower[:, :-1], lower[:, 1:], upper[:, 1:], upper[:, :-1]], axis=-1)
    return np.ascontiguousarray(corners.reshape(-1, 4))
