"""Stations meet the target: whether they overlap, and which of them stand on land."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import SampleError
from texture.recipe import Intake
from texture.targets import Target
from texture.targets.land import on_land

if TYPE_CHECKING:
    from texture.stations import Stations

__all__ = ["on_sphere", "place_stations"]

Floats = NDArray[np.float64]


def place_stations(stations: Stations, target: Target, intake: Intake) -> Stations:
    """Check that stations and target overlap, then move, set aside or keep stations on land.

    A station is on land if it lies in a land polygon, or without polygons in a dry cell. With
    `on_land = "snap"` it moves to the centre of the nearest water cell if that is within one cell; both the
    move and a station set aside are in the audit. Stations outside the grid stay: they inform its edge.

    Raises
    ------
    SampleError
        If no station lies within the target's extent.
    """
    lon, lat = (stations.table[name].to_numpy(dtype=np.float64) for name in ("longitude", "latitude"))
    lon = _same_turn(lon, target.longitude)
    _check_overlap(lon, lat, target, len(stations.table))
    if intake.on_land == "keep":
        return stations
    dry = _dry(lon, lat, target)
    if not dry.any():
        return stations
    if intake.on_land == "drop":
        return stations.with_changes(drop=dry, reason="on land")
    cell, distance_m = _nearest_water(lon[dry], lat[dry], target)
    near = distance_m <= np.sqrt(target.area_m2[cell])
    moved, lost = dry.copy(), dry.copy()
    moved[dry], lost[dry] = near, ~near
    new_lon, new_lat = lon.copy(), lat.copy()
    new_lon[moved], new_lat[moved] = target.longitude[cell[near]], target.latitude[cell[near]]
    if moved.any():
        stations = stations.with_changes(
            values={"longitude": new_lon, "latitude": new_lat},
            changed=moved,
            rule="on land: moved to the nearest water cell, which is within one cell",
        )
    return (
        stations.with_changes(drop=lost, reason="on land, further than one cell from water") if lost.any() else stations
    )


def _same_turn(longitude: Floats, like: Floats) -> Floats:
    """Shift longitudes by whole turns to lie beside the target's."""
    middle = float(np.nanmean(like))
    return np.asarray(longitude + 360.0 * np.round((middle - longitude) / 360.0))


def _check_overlap(lon: Floats, lat: Floats, target: Target, count: int) -> None:
    west, south, east, north = target.bounds
    if ((lon >= west) & (lon <= east) & (lat >= south) & (lat <= north)).any():
        return
    raise SampleError(
        f"none of {count} stations lies on the grid: stations are at longitude {lon.min():.3f}…{lon.max():.3f}, "
        f"latitude {lat.min():.3f}…{lat.max():.3f}; {target.name} covers {west:.3f}…{east:.3f}, "
        f"{south:.3f}…{north:.3f}; check the samples' crs, swapped columns and the target"
    )


def _dry(lon: Floats, lat: Floats, target: Target) -> NDArray[np.bool_]:
    if target.land is not None:
        return on_land(target.land, lon, lat)
    cell, distance_m = _nearest(lon, lat, target, np.ones(target.n_cells, dtype=bool))
    inside = distance_m <= np.sqrt(target.area_m2[cell])  # a station outside the grid is in no cell
    return np.asarray(~target.active[cell] & inside)


def _nearest_water(lon: Floats, lat: Floats, target: Target) -> tuple[NDArray[np.int64], Floats]:
    return _nearest(lon, lat, target, target.active)


def _nearest(lon: Floats, lat: Floats, target: Target, among: NDArray[np.bool_]) -> tuple[NDArray[np.int64], Floats]:
    """Nearest cell centre among some cells, and its distance in metres along the chord."""
    from scipy.spatial import KDTree

    cells = np.flatnonzero(among & np.isfinite(target.longitude) & np.isfinite(target.latitude))
    tree = KDTree(on_sphere(target.longitude[cells], target.latitude[cells]))
    distance, index = tree.query(on_sphere(lon, lat))
    return cells[index], np.asarray(distance)


def on_sphere(lon: Floats, lat: Floats) -> Floats:
    """Points of a sphere of the Earth's mean radius: nearness within a cell needs no ellipsoid."""
    radius_m = 6_371_008.8
    x, y = np.radians(lon), np.radians(lat)
    return radius_m * np.column_stack([np.cos(y) * np.cos(x), np.cos(y) * np.sin(x), np.sin(y)])
