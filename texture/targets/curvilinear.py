"""A structured grid with one- or two-dimensional longitude and latitude, from an open CF dataset."""

from __future__ import annotations

import difflib
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets.corners import Corners, OwnCorners, SharedVertices
from texture.targets.crs import read_crs, unwrapped
from texture.targets.land import on_land, read_land
from texture.targets.mask import find_depth, find_mask, no_mask_note
from texture.targets.structured import Structured
from texture.targets.target import Target

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["read_grid"]


def read_grid(dataset: xr.Dataset, settings: TargetSettings, name: str) -> Target:
    """Read a structured grid; coordinates, mask and depth are found by CF attributes or as named.

    A mask decides what is water; land polygons decide only where the file has no mask. Where both are
    given, the cells that they disagree on are counted in the notes.

    Raises
    ------
    TargetError
        For a file that has no longitude and latitude, or whose cells are folded.
    """
    longitude, latitude, dims, kept = _centres(dataset, settings, name)
    shape = (dataset.sizes[dims[0]], dataset.sizes[dims[1]])
    notes: list[str] = []
    active = find_mask(dataset, settings.mask, dims, name, notes)
    depth = find_depth(dataset, settings.depth, dims, name)
    corners = _corners(dataset, kept, longitude, latitude, dims, notes)
    crs = read_crs(settings.crs or "EPSG:4326", "target.crs")
    if not crs.is_geographic:
        raise TargetError(
            f"{name}: longitude and latitude are in degrees, but target.crs = {settings.crs} is projected; "
            "leave crs out, or give a geographic one"
        )
    flat_lon, flat_lat = longitude.ravel(), latitude.ravel()
    land = read_land(settings.land) if settings.land is not None else None
    topology = Structured(shape, settings.halo_cells)
    active_flat = (
        _active(active, land, flat_lon, flat_lat, no_mask_note(dataset, dims, name), notes) & ~topology.in_halo()
    )
    _check_folds(corners, active_flat, name)
    return Target(
        kind="curvilinear",
        name=name,
        dims=dims,
        shape=shape,
        crs=crs,
        longitude=flat_lon,
        latitude=flat_lat,
        active=active_flat,
        topology=topology,
        corners=corners,
        depth_m=None if depth is None else depth.ravel(),
        land=land,
        inlet_width_m=None if settings.inlet_width_m == "auto" else settings.inlet_width_m,
        notes=tuple(notes),
    )


def _centres(
    dataset: xr.Dataset, settings: TargetSettings, name: str
) -> tuple[NDArray[np.float64], NDArray[np.float64], tuple[str, str], tuple[str, str]]:
    """Cell centres as two-dimensional arrays, their dimensions, and the variables' names."""
    lon_name = _coordinate(dataset, "longitude", settings.longitude, settings.variable, name)
    lat_name = _coordinate(dataset, "latitude", settings.latitude, settings.variable, name)
    lon, lat = dataset[lon_name], dataset[lat_name]
    if lon.ndim == 1 and lat.ndim == 1:
        dims = (str(lat.dims[0]), str(lon.dims[0]))
        if dims[0] == dims[1]:
            raise TargetError(f'{name}: "{lon_name}" and "{lat_name}" are a list of points, expected a grid')
        mesh_lon, mesh_lat = np.meshgrid(lon.to_numpy(), lat.to_numpy())
    elif lon.ndim == 2 and lon.dims == lat.dims:
        dims = (str(lon.dims[0]), str(lon.dims[1]))
        mesh_lon, mesh_lat = lon.to_numpy(), lat.to_numpy()
    else:
        raise TargetError(
            f'{name}: "{lon_name}" has dimensions {lon.dims} and "{lat_name}" {lat.dims}; '
            "expected both one-dimensional, or both on the same two dimensions"
        )
    for variable in (lon, lat):
        _check_degrees(variable, name)
    longitude, latitude = mesh_lon.astype(np.float64), mesh_lat.astype(np.float64)
    if np.nanmax(np.abs(latitude)) > 90.0 or np.nanmax(np.abs(longitude)) > 360.0:
        raise TargetError(
            f'{name}: "{lon_name}" and "{lat_name}" reach {np.nanmax(np.abs(longitude)):g} and '
            f"{np.nanmax(np.abs(latitude)):g}, expected degrees; name the variables under [target]"
        )
    return unwrapped(longitude), latitude, dims, (lon_name, lat_name)


def _check_degrees(variable: xr.DataArray, name: str) -> None:
    """Refuse units that are not degrees; a coordinate that says none is taken as degrees."""
    units = str(variable.attrs.get("units", "")).strip()
    if units and not units.lower().startswith("degree"):
        raise TargetError(
            f'{name}: "{variable.name}" is in "{units}", expected degrees_east and degrees_north; convert it, or name another '
            "variable under [target]"
        )


def _coordinate(dataset: xr.Dataset, which: str, named: str | None, on: str | None, name: str) -> str:
    import cf_xarray  # noqa: F401  (registers the accessor)

    asked = on if named is None else named
    if asked is not None and asked not in dataset.variables:
        close = difflib.get_close_matches(asked, [str(v) for v in dataset.variables], n=1)
        hint = f'did you mean "{close[0]}"?' if close else f"it has {', '.join(map(str, dataset.variables))}"
        raise TargetError(f'{name}: no variable "{asked}" for {which if on is None else "target.variable"}; {hint}')
    if named is not None:
        return named
    found = [str(v) for v in dataset.cf.coordinates.get(which, []) + dataset.cf.standard_names.get(which, [])]
    found = list(dict.fromkeys(found))
    if on is not None:
        found = _coordinates_of(dataset, on, found)
    if len(found) == 1:
        return found[0]
    if not found:
        raise TargetError(
            f"{name}: no {which} with CF attributes (units or standard_name); name the variable as target.{which}"
        )
    raise TargetError(
        f"{name}: several variables are {which} ({', '.join(found)}); choose one as target.{which}, or a variable on the wanted places as target.variable"
    )


def _coordinates_of(dataset: xr.Dataset, variable: str, found: list[str]) -> list[str]:
    """Those that a variable names in its CF attribute `coordinates`, or else that lie on its dimensions."""
    chosen = dataset[variable]
    words = str(chosen.attrs.get("coordinates") or chosen.encoding.get("coordinates") or "").split()
    return [f for f in found if f in words] or [f for f in found if set(dataset[f].dims) <= set(chosen.dims)]


def _corners(
    dataset: xr.Dataset,
    names: tuple[str, str],
    longitude: NDArray[np.float64],
    latitude: NDArray[np.float64],
    dims: tuple[str, str],
    notes: list[str],
) -> Corners:
    """Corners from CF bounds, else from vertices half-way between centres; counter-clockwise."""
    bounds = [dataset[n].attrs.get("bounds") or dataset[n].encoding.get("bounds") for n in names]
    given = [dataset[b].to_numpy() for b in bounds if b in dataset.variables and dataset[b].ndim == 3]
    if len(given) == 2 and all(g.shape == (*longitude.shape, 4) for g in given):
        lon = given[0].astype(np.float64).reshape(-1, 4)
        lat = given[1].astype(np.float64).reshape(-1, 4)
        middle = longitude.reshape(-1, 1)
        lon = lon + 360.0 * np.round((middle - lon) / 360.0)
        if not _is_counter_clockwise(lon, lat):
            lon, lat = np.ascontiguousarray(lon[:, ::-1]), np.ascontiguousarray(lat[:, ::-1])
        return OwnCorners(lon, lat)
    if min(longitude.shape) < 2:
        raise TargetError(f"a grid of {longitude.shape[0]} × {longitude.shape[1]} cells needs its corners as CF bounds")
    notes.append("cell corners are not in the file: taken half-way between the centres")
    vertices = SharedVertices(_vertices(longitude), _vertices(latitude), upward=True)
    lon, lat = vertices
    return vertices if _is_counter_clockwise(lon, lat) else replace(vertices, upward=False)


def _vertices(centres: NDArray[np.float64]) -> NDArray[np.float64]:
    """Shared vertices, shape (rows + 1, columns + 1): means of four centres, extended by one beyond."""
    centres = _continued(_continued(centres))
    padded = np.pad(centres, 1, mode="reflect", reflect_type="odd")
    return np.asarray((padded[:-1, :-1] + padded[1:, :-1] + padded[:-1, 1:] + padded[1:, 1:]) / 4.0)


def _continued(centres: NDArray[np.float64]) -> NDArray[np.float64]:
    """Continue centres in a straight line into missing neighbours (grids often leave land without positions)."""
    if np.isfinite(centres).all():
        return centres
    padded = np.pad(centres, 2, constant_values=np.nan)
    rows, columns = centres.shape
    lines = []
    for down, across in ((1, 0), (-1, 0), (0, 1), (0, -1)):
        near, far = (padded[2 + k * down :, 2 + k * across :][:rows, :columns] for k in (1, 2))
        lines.append(2.0 * near - far)
    stack = np.stack(lines)
    known = np.isfinite(stack)
    mean = np.where(known, stack, 0.0).sum(axis=0) / np.maximum(known.sum(axis=0), 1)
    return np.where(np.isfinite(centres), centres, np.where(known.any(axis=0), mean, np.nan))


def _signed_area(lon: NDArray[np.float64], lat: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(sum(lon[:, i] * lat[:, (i + 1) % 4] - lon[:, (i + 1) % 4] * lat[:, i] for i in range(4)))


def _is_counter_clockwise(lon: NDArray[np.float64], lat: NDArray[np.float64]) -> bool:
    shifted = lon - lon[:, :1]  # small numbers: the cross products of whole longitudes would cancel
    return bool(np.nanmedian(_signed_area(shifted, lat - lat[:, :1])) >= 0.0)


def _check_folds(corners: Corners, active: NDArray[np.bool_], name: str) -> None:
    lon, lat = corners
    folded = active & np.isfinite(lon).all(axis=1) & ~(_signed_area(lon - lon[:, :1], lat - lat[:, :1]) > 0.0)
    if folded.any():
        raise TargetError(
            f"{name}: {int(folded.sum())} water cells are folded or have no area "
            f"(the first is cell {int(np.flatnonzero(folded)[0])}, counted along rows from 0); check its corners"
        )


def _active(
    mask: NDArray[np.bool_] | None,
    land: Any,
    lon: NDArray[np.float64],
    lat: NDArray[np.float64],
    all_water: str,
    notes: list[str],
) -> NDArray[np.bool_]:
    if mask is not None:
        active = mask.ravel()
        if land is not None:
            wrong = int((active == on_land(land, lon, lat)).sum())
            if wrong:
                notes.append(
                    f"mask and land polygons disagree on {wrong} of {active.size} cells: the mask was followed"
                )
        return active
    if land is not None:
        notes.append("the file has no mask: cells whose centre is on land are dry")
        return ~on_land(land, lon, lat) & np.isfinite(lon) & np.isfinite(lat)
    notes.append(all_water)
    return np.isfinite(lon) & np.isfinite(lat)
