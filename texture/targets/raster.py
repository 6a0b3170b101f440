"""Rasters: from bounds, cell size and projection, or from the pixels of a GeoTIFF."""

from __future__ import annotations

from typing import Any

import numpy as np
import pyproj
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets.corners import AxisCorners
from texture.targets.crs import read_crs
from texture.targets.land import on_land, read_land
from texture.targets.structured import Structured
from texture.targets.target import Target

__all__ = ["make_raster", "raster", "read_template"]


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
    land = read_land(settings.land) if settings.land is not None else None
    notes = () if land is not None else ("no land polygons given: every cell of the raster is taken as water",)
    return raster(f"raster {rows} × {columns} of {size:g}", x, y, crs, settings, land=land, notes=notes)


def read_template(settings: TargetSettings) -> Target:
    """Take the cells of a GeoTIFF: its bounds, cell size and projection; pixels without data are dry.

    Raises
    ------
    TargetError
        For a file that is no image, has no projection, or is turned against it.
    """
    import rasterio

    path = settings.file
    assert path is not None  # the caller has looked
    try:
        with rasterio.open(path) as image:
            transform, wkt, shape = image.transform, image.crs and image.crs.to_wkt(), image.shape
            data = image.read_masks(1) > 0
    except rasterio.errors.RasterioIOError as error:
        raise TargetError(f"{path.name}: cannot be read as a GeoTIFF ({error})") from error
    if settings.crs is None and not wkt:
        raise TargetError(f"{path.name}: does not say its projection; give target.crs")
    if transform.b or transform.d:
        raise TargetError(f"{path.name}: its pixels are turned against its projection; expected an image with north up")
    crs = read_crs(settings.crs or wkt, "target.crs")
    x = np.asarray(transform.c + (np.arange(shape[1]) + 0.5) * transform.a, dtype=np.float64)
    y = np.asarray(transform.f + (np.arange(shape[0]) + 0.5) * transform.e, dtype=np.float64)
    land = read_land(settings.land) if settings.land is not None else None
    dry = int((~data).sum())
    notes = (f"{dry:,} pixels of {path.name} have no data: taken as dry",) if dry else ()
    return raster(path.name, x, y, crs, settings, wet=data.ravel(), land=land, notes=notes)


def raster(
    name: str,
    x: NDArray[np.float64],
    y: NDArray[np.float64],
    crs: pyproj.CRS,
    settings: TargetSettings,
    wet: NDArray[np.bool_] | None = None,
    dims: tuple[str, str] = ("y", "x"),
    depth_m: NDArray[np.float64] | None = None,
    land: Any = None,
    notes: tuple[str, ...] = (),
) -> Target:
    """Make a target of evenly spaced axes; without `wet`, land polygons decide which cells are water."""
    to_geographic = pyproj.Transformer.from_crs(crs, 4326, always_xy=True)
    longitude, latitude = _transform_mesh(to_geographic, x, y)
    if wet is None:
        wet = np.ones(longitude.size, dtype=bool) if land is None else ~on_land(land, longitude, latitude)
    elif land is not None:
        wrong = int((wet == on_land(land, longitude, latitude)).sum())
        if wrong:
            notes += (f"mask and land polygons disagree on {wrong} of {wet.size} cells: the mask was followed",)
    topology = Structured((y.size, x.size), settings.halo_cells)
    return Target(
        kind="raster",
        name=name,
        dims=dims,
        shape=(y.size, x.size),
        crs=crs,
        longitude=longitude,
        latitude=latitude,
        active=wet & ~topology.in_halo(),
        topology=topology,
        corners=AxisCorners(to_geographic, _edges(x), _edges(y)),
        x=x,
        y=y,
        depth_m=depth_m,
        land=land,
        inlet_width_m=None if settings.inlet_width_m == "auto" else settings.inlet_width_m,
        notes=notes,
    )


def _edges(axis: NDArray[np.float64]) -> NDArray[np.float64]:
    """Edges of cells around evenly spaced centres."""
    half = (axis[-1] - axis[0]) / (axis.size - 1) / 2.0 if axis.size > 1 else 0.5
    return np.append(axis - half, axis[-1] + half)


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
