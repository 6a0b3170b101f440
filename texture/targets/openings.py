"""Where the outer edge of a structured grid is open water, and which openings are river inlets."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Opening", "find_openings", "perimeter"]


@dataclass(frozen=True, eq=False)
class Opening:
    """One unbroken run of water cells along the outer edge.

    Attributes
    ----------
    cells : int array
        Flat indices, in order along the edge.
    length_m : float
        Length of the run along the edge on the ellipsoid.
    sides : tuple of str
        Sides of the grid that it touches, by the compass direction of their outward face.
    inlet : bool
        True where the run is too narrow to be sea: a river or a channel that enters the grid.
    """

    cells: NDArray[np.int64]
    length_m: float
    sides: tuple[str, ...]
    inlet: bool

    def __str__(self) -> str:
        kind = "river inlet, not rimmed" if self.inlet else "open sea"
        return f"{' and '.join(self.sides)}: {self.cells.size} cells, {self.length_m / 1000:.1f} km, {kind}"


def perimeter(shape: tuple[int, int]) -> NDArray[np.int64]:
    """Return flat indices of the outer cells in order around the grid, each once.

    >>> perimeter((3, 3)).tolist()
    [0, 1, 2, 5, 8, 7, 6, 3]
    """
    rows, columns = shape
    index = np.arange(rows * columns, dtype=np.int64).reshape(shape)
    if rows == 1 or columns == 1:
        return index.ravel()
    return np.concatenate([index[0], index[1:, -1], index[-1, -2::-1], index[-2:0:-1, 0]])


def find_openings(
    active: NDArray[np.bool_],
    longitude: NDArray[np.float64],
    latitude: NDArray[np.float64],
    shape: tuple[int, int],
    inlet_width_m: float | None = None,
) -> tuple[Opening, ...]:
    """Find the runs of water along the outer edge, widest first.

    Parameters
    ----------
    active : bool array, shape (n,)
    longitude, latitude : float arrays, shape (n,), degrees
    shape : (rows, columns)
    inlet_width_m : float, optional
        A run narrower than this is an inlet. By default a tenth of the widest run: on a coastal grid the
        sea is one long run, and a river enters through a few cells.
    """
    ring = perimeter(shape)
    wet = active[ring]
    if not wet.any():
        return ()
    spacing = _spacing_m(ring, longitude, latitude)
    faces = _side_names(shape, longitude, latitude)
    runs = [_run(ring[part], spacing[part], faces, shape) for part in _wet_runs(wet)]
    runs.sort(key=lambda run: -run[1])
    limit = runs[0][1] / 10.0 if inlet_width_m is None else inlet_width_m
    return tuple(Opening(cells, length, sides, inlet=length < limit) for cells, length, sides in runs)


def _wet_runs(wet: NDArray[np.bool_]) -> list[NDArray[np.int64]]:
    """Split the ring's wet positions into unbroken runs; the ring closes on itself."""
    if wet.all():
        return [np.arange(wet.size)]
    start = int(np.flatnonzero(~wet)[0])  # begin on land, so that no run crosses the seam of the ring
    order = np.roll(np.arange(wet.size), -start)
    turned = wet[order]
    firsts = np.flatnonzero(turned & ~np.roll(turned, 1))
    lasts = np.flatnonzero(turned & ~np.roll(turned, -1))
    return [order[a : b + 1] for a, b in zip(firsts, lasts, strict=True)]


def _spacing_m(
    ring: NDArray[np.int64], longitude: NDArray[np.float64], latitude: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Length of edge that each ring cell stands for: half the way to both of its neighbours."""
    import pyproj

    lon, lat = longitude[ring], latitude[ring]
    step = np.asarray(pyproj.Geod(ellps="WGS84").inv(lon, lat, np.roll(lon, -1), np.roll(lat, -1))[2])
    return np.asarray(np.nan_to_num((step + np.roll(step, 1)) / 2.0))


def _run(
    cells: NDArray[np.int64], spacing: NDArray[np.float64], faces: dict[str, str], shape: tuple[int, int]
) -> tuple[NDArray[np.int64], float, tuple[str, ...]]:
    row, column = np.divmod(cells, shape[1])
    on = {
        "first_row": row == 0,
        "last_column": column == shape[1] - 1,
        "last_row": row == shape[0] - 1,
        "first_column": column == 0,
    }
    # A corner cell belongs to two sides; a side counts when it has a cell of its own or the run is one corner.
    owned = {name: int((mask & ~_corner(row, column, shape)).sum()) for name, mask in on.items()}
    named = [name for name, count in owned.items() if count] or [name for name, mask in on.items() if mask.any()]
    return cells, float(spacing.sum()), tuple(dict.fromkeys(faces[name] for name in named))


def _corner(row: NDArray[np.int64], column: NDArray[np.int64], shape: tuple[int, int]) -> NDArray[np.bool_]:
    return np.asarray(((row == 0) | (row == shape[0] - 1)) & ((column == 0) | (column == shape[1] - 1)))


def _side_names(
    shape: tuple[int, int], longitude: NDArray[np.float64], latitude: NDArray[np.float64]
) -> dict[str, str]:
    """Name each side by the compass point nearest to the direction from the grid's middle to it."""
    lon, lat = longitude.reshape(shape), latitude.reshape(shape)
    middle = np.nanmean(lon), np.nanmean(lat)
    shrink = np.cos(np.radians(middle[1]))
    sides = {
        "first_row": (lon[0], lat[0]),
        "last_column": (lon[:, -1], lat[:, -1]),
        "last_row": (lon[-1], lat[-1]),
        "first_column": (lon[:, 0], lat[:, 0]),
    }
    names = {}
    for side, (x, y) in sides.items():
        east = (float(np.nanmean(x)) - middle[0]) * shrink
        north = float(np.nanmean(y)) - middle[1]
        azimuth = np.degrees(np.arctan2(east, north)) % 360.0
        names[side] = ("north", "east", "south", "west")[round(azimuth / 90.0) % 4]
    return names
