"""A NetCDF file of a grid: which kind it is, and its reader."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import pyproj
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets.crs import read_crs
from texture.targets.curvilinear import read_grid
from texture.targets.land import read_land
from texture.targets.mask import find_depth, find_mask, no_mask_note
from texture.targets.raster import raster
from texture.targets.target import Target
from texture.targets.ugrid import mesh_variable, read_mesh

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["read_netcdf"]

METRES = {"m": 1.0, "metre": 1.0, "metres": 1.0, "meter": 1.0, "meters": 1.0, "km": 1000.0, "kilometre": 1000.0}


def read_netcdf(settings: TargetSettings) -> Target:
    """Read a mesh (UGRID), a raster (evenly spaced projection coordinates), or a grid of longitudes and latitudes.

    Raises
    ------
    TargetError
        For a file that is not NetCDF, and as the readers say.
    """
    path = settings.file
    assert path is not None  # the caller has looked
    with _open(path) as dataset:
        mesh, axes = mesh_variable(dataset), _projected_axes(dataset)
        if settings.variable is not None and (mesh is not None or axes is not None):
            raise TargetError(
                f"{path.name}: target.variable chooses among longitudes and latitudes of a staggered grid; this file is "
                + ("a mesh: say location" if mesh is not None else "in projection coordinates: leave it out")
            )
        if mesh is not None:
            return read_mesh(dataset, settings, path.name)
        if axes is not None and settings.longitude is None:
            return _read_projected(dataset, axes, settings, path.name)
        return read_grid(dataset, settings, path.name)


def _open(path: Path) -> xr.Dataset:
    import xarray as xr

    try:
        return xr.open_dataset(path, engine="netcdf4", decode_times=False)
    except (OSError, ValueError, RuntimeError) as error:
        raise TargetError(f"{path.name}: cannot be read as NetCDF; expected a CF grid file") from error


def _projected_axes(dataset: xr.Dataset) -> tuple[str, str] | None:
    """Names of one-dimensional projection coordinates, x before y; None where the file has none."""
    found = {
        variable.attrs.get("standard_name"): str(name)
        for name, variable in dataset.variables.items()
        if variable.ndim == 1
    }
    x, y = found.get("projection_x_coordinate"), found.get("projection_y_coordinate")
    return (x, y) if x is not None and y is not None else None


def _read_projected(dataset: xr.Dataset, axes: tuple[str, str], settings: TargetSettings, name: str) -> Target:
    crs = _grid_mapping(dataset, settings, name)
    x, y = (_axis(dataset[a], crs, name) for a in axes)
    for axis, values in zip(axes, (x, y), strict=True):
        steps = np.diff(values)
        if values.size < 2 or not np.allclose(steps, steps[0], rtol=1e-6, atol=0.0):  # a stored axis is exact to better
            raise TargetError(
                f'{name}: "{axis}" is not evenly spaced; give longitude and latitude of the cells instead'
            )
    dims = (str(dataset[axes[1]].dims[0]), str(dataset[axes[0]].dims[0]))
    notes: list[str] = []
    mask = find_mask(dataset, settings.mask, dims, name, notes)
    depth = find_depth(dataset, settings.depth, dims, name)
    land = read_land(settings.land) if settings.land is not None else None
    if mask is None and land is None:
        notes.append(no_mask_note(dataset, dims, name))
    return raster(
        name, x, y, crs, settings, None if mask is None else mask.ravel(), dims,
        None if depth is None else depth.ravel(), land, tuple(notes),
    )  # fmt: skip


def _axis(variable: xr.DataArray, crs: pyproj.CRS, name: str) -> NDArray[np.float64]:
    """A projection coordinate in the units of its system; one that says no units is taken to be in them."""
    values, units = np.asarray(variable.to_numpy(), dtype=np.float64), str(variable.attrs.get("units", "")).strip()
    if not units:
        return values
    if units not in METRES:
        raise TargetError(f'{name}: "{variable.name}" is in "{units}", expected m or km; set its attribute units')
    return np.asarray(values * METRES[units] / crs.axis_info[0].unit_conversion_factor)


def _grid_mapping(dataset: xr.Dataset, settings: TargetSettings, name: str) -> pyproj.CRS:
    if settings.crs is not None:
        return read_crs(settings.crs, "target.crs")
    for variable in dataset.variables.values():
        if "grid_mapping_name" in variable.attrs or "crs_wkt" in variable.attrs:
            try:
                return pyproj.CRS.from_cf(variable.attrs)
            except (pyproj.exceptions.CRSError, KeyError) as error:
                raise TargetError(f'{name}: its grid mapping "{variable}" cannot be read; give target.crs') from error
    raise TargetError(f'{name}: projection coordinates without a grid mapping; give target.crs, such as "EPSG:32626"')
