"""Where zones of the user's lie: polygons from a file, or the cells that a variable numbers."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.targets.crs import beside
from texture.targets.land import read_land

if TYPE_CHECKING:
    from texture.targets.target import Target

__all__ = ["inside", "numbered_area", "polygon_area", "way_in_m"]

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]


def polygon_area(path: Path) -> Any:
    """Polygons of a file as one geometry in longitude and latitude; raises `TargetError` as `read_land` does."""
    return read_land(path)


def numbered_area(path: Path, variable: str, values: tuple[int, ...], target: Target, key: str) -> Any:
    """Join the cells where a variable has one of some values, as one geometry in longitude and latitude.

    Raises
    ------
    TargetError
        If there is no such variable, it does not lie on the target's cells, no cell has such a value, or the target is a
        list of places.
    """
    import shapely

    from texture.targets.fields import read_numbers

    if target.corners is None:
        raise TargetError(f"{key}: {target.name} is a list of places without cells; give polygons instead")
    numbers = read_numbers(path, variable, target, key)
    chosen = np.isin(numbers, values)
    if not (chosen & target.active).any():
        known = ", ".join(f"{v:g}" for v in np.unique(numbers[target.active & np.isfinite(numbers)])[:8])
        raise TargetError(f'{key}: no water cell has "{variable}" = {list(values)}; it has {known or "no numbers"}')
    lon, lat = target.corners.of(np.flatnonzero(chosen[target.cell_of_piece]))
    lon = beside(lon, float(lon.flat[0]))
    area = shapely.union_all(shapely.make_valid(shapely.polygons(np.stack([lon, lat], axis=-1))))
    shapely.prepare(area)
    return area


def inside(area: Any, longitude: Floats, latitude: Floats) -> Bools:
    """Tell which points lie in an area, whatever turn their longitudes are written in; a point without a place does not."""
    import shapely

    located = np.isfinite(longitude) & np.isfinite(latitude)
    found = np.zeros(longitude.shape, dtype=bool)
    west, _, east, _ = shapely.bounds(area)
    found[located] = shapely.contains_xy(area, beside(longitude[located], float(west + east) / 2.0), latitude[located])
    return found


def way_in_m(area: Any, longitude: Floats, latitude: Floats, within_m: float) -> Floats:
    """Distance from points to an area's edge, positive inside and negative outside, metres; ± infinity beyond `within_m`.

    Measured in an azimuthal projection about the middle of the area, which is true to 1 in 10,000 within 150 km of it.
    """
    import pyproj
    import shapely

    west, south, east, north = (float(v) for v in shapely.bounds(area))
    middle = (west + east) / 2.0
    plane = pyproj.CRS.from_proj4(f"+proj=aeqd +lat_0={(south + north) / 2:.6f} +lon_0={middle:.6f} +datum=WGS84")
    to_plane = pyproj.Transformer.from_crs(4326, plane, always_xy=True)
    edge = shapely.transform(shapely.boundary(area), lambda c: np.column_stack(to_plane.transform(c[:, 0], c[:, 1])))
    lines, line = shapely.get_coordinates(shapely.get_parts(edge), return_index=True)
    start = np.flatnonzero(line[1:] == line[:-1])
    tree = shapely.STRtree(shapely.linestrings(np.stack([lines[start], lines[start + 1]], axis=1)))
    sign = np.where(inside(area, longitude, latitude), 1.0, -1.0)
    result = sign * np.inf
    located = np.flatnonzero(np.isfinite(longitude) & np.isfinite(latitude))
    x, y = to_plane.transform(beside(longitude[located], middle), latitude[located])
    (index, _), distance = tree.query_nearest(
        shapely.points(x, y), max_distance=within_m, return_distance=True, all_matches=False
    )
    result[located[index]] = sign[located[index]] * distance
    return result
