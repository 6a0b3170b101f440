"""Covariates from files: a GeoTIFF in any CRS, or a NetCDF variable on coordinates of its own or on the target's cells."""

from __future__ import annotations

import difflib
import math
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.recipe import Covariate
from texture.space import Field, Grid, Projected, Scatter
from texture.targets.target import Target

if TYPE_CHECKING:
    import pyproj
    import xarray as xr

__all__ = ["read_covariate", "target_depth"]

Floats = NDArray[np.float64]
ToPlane = Callable[[Floats, Floats], Floats]
FromPlane = Callable[[Floats], tuple[Floats, Floats]]
MARGIN = 2  # pixels read beyond the outermost place, so that it too lies between pixels


def read_covariate(
    settings: Covariate, target: Target, wanted: Floats, to_plane: ToPlane, from_plane: FromPlane
) -> Field:
    """Read one covariate of the recipe as a field over the working plane.

    Parameters
    ----------
    settings : Covariate
        With a file.
    target : Target
    wanted : float array, shape (m, 2)
        Places of the plane where values will be asked for: no more of an image is read than they need.
    to_plane, from_plane : callable
        From longitude and latitude to the plane's metres, and back.

    Raises
    ------
    TargetError
        If the file cannot be read, does not say where it lies, has several variables or bands and none is chosen, or has no value.
    """
    path = settings.file
    assert path is not None  # the recipe has seen to it, or the target gives it
    if path.suffix.lower() in (".tif", ".tiff"):
        return _from_image(path, settings.name, wanted, from_plane)
    return _from_netcdf(path, settings, target, to_plane, from_plane)


def target_depth(target: Target, to_plane: ToPlane, from_plane: FromPlane) -> Field:
    """Water depth of the target's own cells, between them by interpolation; land has none."""
    if target.depth_m is None:
        raise TargetError(
            f'covariate "depth": {target.name} has no depth; give a file, or name its variable as target.depth'
        )
    return _on_target(np.where(target.active, target.depth_m, np.nan), target, "depth", to_plane, from_plane)


def _projector(crs: pyproj.CRS, middle: float, from_plane: FromPlane) -> Callable[[Floats], Floats]:
    """From the plane to a CRS; longitudes within half a turn of `middle`."""
    import pyproj

    to_crs = None if crs.is_geographic else pyproj.Transformer.from_crs(4326, crs, always_xy=True)

    def project(points: Floats) -> Floats:
        lon, lat = from_plane(points)
        if to_crs is not None:
            return np.column_stack(to_crs.transform(lon, lat))
        return np.column_stack([lon + 360.0 * np.round((middle - lon) / 360.0), lat])

    return project


def _from_image(path: Path, name: str, wanted: Floats, from_plane: FromPlane) -> Field:
    import pyproj
    import rasterio
    from rasterio.windows import Window

    try:
        with rasterio.open(path) as image:
            if image.crs is None:
                raise TargetError(f"{path.name}: does not say its coordinate system; store it with one")
            if image.count != 1:
                raise TargetError(
                    f'{path.name}: has {image.count} bands, expected one for covariate "{name}"; store that band alone'
                )
            inverse, middle = ~image.transform, 0.5 * (image.bounds.left + image.bounds.right)
            project = _projector(pyproj.CRS.from_wkt(image.crs.to_wkt()), middle, from_plane)

            def to_pixels(points: Floats) -> Floats:
                x, y = project(points).T
                pixel = np.column_stack(
                    [inverse.a * x + inverse.b * y + inverse.c, inverse.d * x + inverse.e * y + inverse.f]
                )
                return pixel - 0.5  # a value stands in the middle of its pixel

            place = to_pixels(wanted)
            if not np.isfinite(place).all():
                raise TargetError(f"{path.name}: some places cannot be expressed in its coordinate system")
            first = [max(0, math.floor(v) - MARGIN) for v in place.min(axis=0)]
            last = [
                min(n, math.ceil(v) + MARGIN + 1)
                for v, n in zip(place.max(axis=0), (image.width, image.height), strict=True)
            ]
            if last[0] - first[0] < 2 or last[1] - first[1] < 2:
                raise TargetError(f'{path.name}: covers none of the places where covariate "{name}" is wanted')
            window = Window(first[0], first[1], last[0] - first[0], last[1] - first[1])
            band = image.read(1, window=window, masked=True).astype(np.float64).filled(np.nan)
    except rasterio.errors.RasterioIOError as error:
        raise TargetError(f"{path.name}: cannot be read as a GeoTIFF ({error})") from error
    _check_any(band, path.name, name)
    columns, rows = (first[k] + np.arange(n, dtype=np.float64) for k, n in ((0, band.shape[1]), (1, band.shape[0])))
    return Projected(Grid(columns, rows, band), to_pixels)


def _check_any(values: Floats, file: str, name: str) -> None:
    if not np.isfinite(values).any():
        raise TargetError(f'{file}: has no value where covariate "{name}" is wanted')


def _from_netcdf(path: Path, settings: Covariate, target: Target, to_plane: ToPlane, from_plane: FromPlane) -> Field:
    import xarray as xr

    try:
        with xr.open_dataset(path, engine="netcdf4", decode_times=False, decode_timedelta=False) as dataset:
            variable = _variable(dataset, settings, path.name).squeeze(drop=True).load()
            values = variable.to_numpy().astype(np.float64)
            _check_any(values, path.name, settings.name)
            axes = _axes(dataset, variable, path.name)
            if axes is not None:
                x, y, crs, ordered = axes
                project = _projector(crs, float(np.mean(x[[0, -1]])), from_plane)
                return Projected(Grid(x, y, ordered), project)
            around = _around(dataset, variable)
    except (OSError, ValueError) as error:
        if isinstance(error, TargetError):
            raise
        raise TargetError(f"{path.name}: cannot be read as NetCDF ({error})") from error
    if around is not None:
        return _scatter(values.ravel(), *around, to_plane, None)
    shape = tuple(n for n in target.shape if n > 1)
    if values.shape == shape:
        return _on_target(values.ravel(), target, settings.name, to_plane, from_plane)
    raise TargetError(
        f'{path.name}: "{variable.name}" has shape {dict(variable.sizes)} and no coordinates by CF attributes, expected '
        f"longitude and latitude beside it, or one value for each cell of {target.name}, {dict(zip(target.dims, target.shape, strict=True))}"
    )


def _variable(dataset: xr.Dataset, settings: Covariate, file: str) -> xr.DataArray:
    held = [str(v) for v, a in dataset.data_vars.items() if a.squeeze().ndim >= 1 and a.dtype.kind in "fiu"]
    bounds = {str(a.attrs.get("bounds", "")) for a in dataset.variables.values()}
    held = [v for v in held if v not in bounds]
    if settings.variable is not None:
        if settings.variable not in dataset.data_vars:
            close = difflib.get_close_matches(settings.variable, held, n=1, cutoff=0.5)
            hint = f'did you mean "{close[0]}"?' if close else f"it has {', '.join(held)}"
            raise TargetError(f'{file}: no variable "{settings.variable}" for covariate "{settings.name}"; {hint}')
        return dataset[settings.variable]
    if len(held) != 1:
        found = f"{len(held)} variables ({', '.join(held)})" if held else "no variable of numbers"
        raise TargetError(f'{file}: has {found}, expected one for covariate "{settings.name}"; choose it as variable')
    return dataset[held[0]]


def _role(variable: xr.DataArray) -> str:
    """What a coordinate is by its CF attributes."""
    standard, units = str(variable.attrs.get("standard_name", "")), str(variable.attrs.get("units", "")).lower()
    if standard in ("longitude", "latitude", "projection_x_coordinate", "projection_y_coordinate"):
        return standard
    return {
        "degrees_east": "longitude",
        "degrees_north": "latitude",
        "degree_east": "longitude",
        "degree_north": "latitude",
    }.get(units, "")


def _axes(dataset: xr.Dataset, variable: xr.DataArray, file: str) -> tuple[Floats, Floats, pyproj.CRS, Floats] | None:
    """One-dimensional coordinates, their CRS, and the values with rows along y; None where there are none."""
    if variable.ndim != 2:
        return None
    roles = {_role(dataset[d]): str(d) for d in variable.dims if d in dataset.variables}
    for names in (("longitude", "latitude"), ("projection_x_coordinate", "projection_y_coordinate")):
        if set(names) <= set(roles):
            x, y = (dataset[roles[n]].to_numpy().astype(np.float64) for n in names)
            ordered = variable.transpose(roles[names[1]], roles[names[0]]).to_numpy().astype(np.float64)
            return x, y, _crs(dataset, variable, file, names[0] == "longitude"), ordered
    return None


def _crs(dataset: xr.Dataset, variable: xr.DataArray, file: str, degrees: bool) -> pyproj.CRS:
    import pyproj

    if degrees:
        return pyproj.CRS.from_epsg(4326)
    named: Any = variable.attrs.get("grid_mapping", variable.encoding.get("grid_mapping"))
    if named is None or str(named) not in dataset.variables:
        raise TargetError(f'{file}: "{variable.name}" lies on projection coordinates without a grid mapping; store one')
    try:
        return pyproj.CRS.from_cf(dataset[str(named)].attrs)
    except (pyproj.exceptions.CRSError, KeyError) as error:
        raise TargetError(f'{file}: its grid mapping "{named}" cannot be read') from error


def _around(dataset: xr.Dataset, variable: xr.DataArray) -> tuple[Floats, Floats] | None:
    """Longitude and latitude on the variable's own dimensions; None where the file has none."""
    found: dict[str, Floats] = {}
    for coordinate in dataset.variables:
        other = dataset[coordinate].squeeze(drop=True)
        if other.dims == variable.dims and _role(other) in ("longitude", "latitude"):
            found[_role(other)] = other.to_numpy().astype(np.float64).ravel()
    return (found["longitude"], found["latitude"]) if len(found) == 2 else None


def _scatter(values: Floats, longitude: Floats, latitude: Floats, to_plane: ToPlane, spacing_m: Floats | None) -> Field:
    from scipy.spatial import cKDTree

    located = np.isfinite(longitude) & np.isfinite(latitude)
    known = located & np.isfinite(values)
    points = to_plane(longitude[known], latitude[known])
    if spacing_m is None:
        everywhere = to_plane(longitude[located], latitude[located])
        nearest = cKDTree(everywhere).query(points, k=[min(2, len(everywhere))])[0][:, 0]
        spacing_m = np.full(len(values), np.nan)
        spacing_m[known] = np.maximum(nearest, 1e-3)
    return Scatter(points, values[known], spacing_m[known])


def _on_target(values: Floats, target: Target, name: str, to_plane: ToPlane, from_plane: FromPlane) -> Field:
    """Values on the target's cells: along its axes where it has some."""
    if not np.isfinite(values).any():
        raise TargetError(f'covariate "{name}": no cell of {target.name} has a value')
    if (
        target.kind == "raster"
        and target.x is not None
        and target.y is not None
        and min(target.x.size, target.y.size) > 1
    ):
        project = _projector(target.crs, float(np.mean(target.x[[0, -1]])), from_plane)
        return Projected(Grid(target.x, target.y, values.reshape(target.shape)), project)
    return _scatter(
        values,
        target.longitude,
        target.latitude,
        to_plane,
        np.sqrt(target.area_m2) if target.corners is not None else None,
    )
