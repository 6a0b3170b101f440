"""Corners of cells: shared vertices of a grid, or each cell's own."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    import pyproj

__all__ = ["AxisCorners", "Corners", "OwnCorners", "SharedVertices"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


class Corners:
    """Polygons that cells are made of, counter-clockwise; unpacks as longitude (m, k) and latitude (m, k)."""

    def of(self, pieces: Ints | slice) -> tuple[Floats, Floats]:
        """Longitude and latitude of some polygons, shapes (p, k)."""
        raise NotImplementedError

    @property
    def count(self) -> int:
        """Number of polygons."""
        raise NotImplementedError

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east and north."""
        raise NotImplementedError

    def __iter__(self) -> Iterator[Floats]:
        return iter(self.of(slice(None)))

    def __getitem__(self, axis: int) -> Floats:
        return self.of(slice(None))[axis]


@dataclass(frozen=True, eq=False)
class OwnCorners(Corners):
    """Each polygon has its own corners, shapes (m, k); the last is repeated where a polygon has fewer than k."""

    longitude: Floats
    latitude: Floats

    def of(self, pieces: Ints | slice) -> tuple[Floats, Floats]:
        """Longitude and latitude of some polygons."""
        return self.longitude[pieces], self.latitude[pieces]

    @property
    def count(self) -> int:
        """Number of polygons."""
        return len(self.longitude)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east and north."""
        return _bounds(self.longitude, self.latitude)


@dataclass(frozen=True, eq=False)
class SharedVertices(Corners):
    """Vertices that neighbouring cells share, shapes (rows + 1, columns + 1): a quarter of the memory of corners.

    `upward` tells whether rows run from south to north (or the grid is turned so that this order is
    counter-clockwise).

    >>> lon, lat = np.meshgrid([0.0, 1.0, 2.0], [0.0, 1.0])
    >>> SharedVertices(lon, lat, upward=True).of(np.array([1]))[0].tolist()
    [[1.0, 2.0, 2.0, 1.0]]
    """

    longitude: Floats
    latitude: Floats
    upward: bool

    def of(self, pieces: Ints | slice) -> tuple[Floats, Floats]:
        """Longitude and latitude of some polygons."""
        columns = self.longitude.shape[1] - 1
        cells = np.arange(self.count)[pieces] if isinstance(pieces, slice) else pieces
        row, column = np.divmod(cells, columns)
        lower, upper = (row, row + 1) if self.upward else (row + 1, row)
        rows = np.stack([lower, lower, upper, upper], axis=-1)
        across = np.stack([column, column + 1, column + 1, column], axis=-1)
        return self.longitude[rows, across], self.latitude[rows, across]

    @property
    def count(self) -> int:
        """Number of polygons."""
        rows, columns = (int(n) - 1 for n in self.longitude.shape)
        return rows * columns

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east and north."""
        return _bounds(self.longitude, self.latitude)


@dataclass(frozen=True, eq=False)
class AxisCorners(Corners):
    """Corners of a raster, projected anew whenever they are asked for: only the edges of its rows and columns are kept.

    Parameters
    ----------
    to_degrees : pyproj.Transformer
        From the raster's projection, x first.
    x, y : float arrays, shapes (columns + 1,) and (rows + 1,)
        Edges in the order of the file.
    """

    to_degrees: pyproj.Transformer
    x: Floats
    y: Floats

    def of(self, pieces: Ints | slice) -> tuple[Floats, Floats]:
        """Longitude and latitude of some polygons."""
        cells = np.arange(self.count)[pieces] if isinstance(pieces, slice) else pieces
        row, column = np.divmod(cells, self.x.size - 1)
        near, far = (row, row + 1) if self.y[0] < self.y[-1] else (row + 1, row)
        left, right = (column, column + 1) if self.x[0] < self.x[-1] else (column + 1, column)
        x = self.x[np.stack([left, right, right, left], axis=-1)]
        y = self.y[np.stack([near, near, far, far], axis=-1)]
        longitude, latitude = self.to_degrees.transform(x, y)
        return np.asarray(longitude), np.asarray(latitude)

    @property
    def count(self) -> int:
        """Number of polygons."""
        return (self.x.size - 1) * (self.y.size - 1)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east and north, by the outer edge and a choice of corners inside it."""
        inner_x, inner_y = (a[np.unique(np.linspace(0, a.size - 1, 201).astype(np.int64))] for a in (self.x, self.y))
        meshes = [
            np.meshgrid(inner_x, inner_y),
            np.meshgrid(self.x, self.y[[0, -1]]),
            np.meshgrid(self.x[[0, -1]], self.y),
        ]
        x, y = (np.concatenate([mesh[axis].ravel() for mesh in meshes]) for axis in (0, 1))
        return _bounds(*(np.asarray(a) for a in self.to_degrees.transform(x, y)))


def _bounds(lon: Floats, lat: Floats) -> tuple[float, float, float, float]:
    return float(np.nanmin(lon)), float(np.nanmin(lat)), float(np.nanmax(lon)), float(np.nanmax(lat))
