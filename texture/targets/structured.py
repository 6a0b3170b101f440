"""How the cells of a grid of rows and columns hang together: neighbours, outer edge, openings."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.targets.openings import COMPASS, Opening, Run, sort_openings

if TYPE_CHECKING:
    from texture.targets.target import Target

__all__ = ["Structured", "perimeter"]

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
TOWARD = np.array([(0.0, 1.0), (1.0, 0.0), (0.0, -1.0), (-1.0, 0.0)])
"""East and north of each point of `COMPASS`."""


@dataclass(frozen=True)
class Structured:
    """Rows and columns, with `halo` outer rows and columns that belong to the model's edge handling.

    The outer edge is that of the cells inside the halo.
    """

    shape: tuple[int, int]
    halo: int = 0

    def edges(self) -> NDArray[np.integer]:
        """Pairs of cells that share a side, shape (m, 2)."""
        rows, columns = self.shape
        index = np.arange(rows * columns, dtype=np.int32).reshape(self.shape)
        pairs = np.empty((rows * (columns - 1) + (rows - 1) * columns, 2), dtype=np.int32)  # half the memory of int64
        across, down = np.split(pairs, [rows * (columns - 1)])
        across[:, 0], across[:, 1] = index[:, :-1].ravel(), index[:, 1:].ravel()
        down[:, 0], down[:, 1] = index[:-1].ravel(), index[1:].ravel()
        return pairs

    def in_halo(self) -> Bools:
        """Cells of the halo, shape (n,)."""
        inside = np.zeros(self.shape, dtype=bool)
        inside[self.halo : self.shape[0] - self.halo, self.halo : self.shape[1] - self.halo] = True
        return ~inside.ravel()

    def ring(self) -> Ints:
        """Outer cells in order around the grid, each once."""
        rows, columns = (n - 2 * self.halo for n in self.shape)
        row, column = np.divmod(perimeter((rows, columns)), columns)
        return (row + self.halo) * self.shape[1] + column + self.halo

    def sides(self, target: Target) -> dict[str, Bools]:
        """Outer cells of each compass side; a corner cell belongs to both of its sides."""
        by_side = {name: np.zeros(target.n_cells, dtype=bool) for name in COMPASS}
        for cells, name in self._edges_named(target):
            by_side[name][cells] = True
        return by_side

    def openings(self, target: Target) -> tuple[Opening, ...]:
        """Runs of water along the outer edge."""
        ring = self.ring()
        wet = target.active[ring]
        if not wet.any():
            return ()
        spacing = _spacing_m(ring, target)
        named = self._edges_named(target)
        corners = {int(cells[k]) for cells, _ in named for k in (0, -1)}
        runs: list[Run] = []
        for part in _wet_runs(wet):
            cells = ring[part]
            runs.append((cells, float(spacing[part].sum()), _sides_touched(cells, named, corners)))
        return sort_openings(runs, target.inlet_width_m)

    def _edges_named(self, target: Target) -> list[tuple[Ints, str]]:
        """Give the cells of the four edges, each with a compass point of its own.

        Edges keep their order around the grid, and together they lie as near as can be to the directions of their points from
        the middle: on a strongly sheared grid two edges may lie west of it, and only one of them is its west.
        """
        h = self.halo
        index = np.arange(target.n_cells, dtype=np.int64).reshape(self.shape)
        inner = index[h : self.shape[0] - h, h : self.shape[1] - h]
        lon, lat = target.longitude, target.latitude
        middle_lon, middle_lat = np.nanmean(lon[inner]), np.nanmean(lat[inner])
        shrink = np.cos(np.radians(middle_lat))
        edges = (inner[0], inner[:, -1], inner[-1], inner[:, 0])
        away = np.array([((np.nanmean(lon[e]) - middle_lon) * shrink, np.nanmean(lat[e]) - middle_lat) for e in edges])
        away /= np.maximum(np.linalg.norm(away, axis=1, keepdims=True), np.finfo(np.float64).tiny)
        orders = [[(first + way * k) % 4 for k in range(4)] for first in range(4) for way in (1, -1)]
        best = max(orders, key=lambda order: float((away * TOWARD[order]).sum()))
        return [(cells, COMPASS[point]) for cells, point in zip(edges, best, strict=True)]


def perimeter(shape: tuple[int, int]) -> Ints:
    """Return flat indices of the outer cells in order around the grid, each once.

    >>> perimeter((3, 3)).tolist()
    [0, 1, 2, 5, 8, 7, 6, 3]
    """
    rows, columns = shape
    index = np.arange(rows * columns, dtype=np.int64).reshape(shape)
    if rows == 1 or columns == 1:
        return index.ravel()
    return np.concatenate([index[0], index[1:, -1], index[-1, -2::-1], index[-2:0:-1, 0]])


def _wet_runs(wet: Bools) -> list[Ints]:
    """Split the ring's wet positions into unbroken runs; the ring closes on itself."""
    if wet.all():
        return [np.arange(wet.size)]
    start = int(np.flatnonzero(~wet)[0])  # begin on land, so that no run crosses the seam of the ring
    order = np.roll(np.arange(wet.size), -start)
    turned = wet[order]
    firsts = np.flatnonzero(turned & ~np.roll(turned, 1))
    lasts = np.flatnonzero(turned & ~np.roll(turned, -1))
    return [order[a : b + 1] for a, b in zip(firsts, lasts, strict=True)]


def _spacing_m(ring: Ints, target: Target) -> Floats:
    """Length of edge that each ring cell stands for: half the way to both of its neighbours."""
    import pyproj

    lon, lat = target.longitude[ring], target.latitude[ring]
    step = np.asarray(pyproj.Geod(ellps="WGS84").inv(lon, lat, np.roll(lon, -1), np.roll(lat, -1))[2])
    return np.asarray(np.nan_to_num((step + np.roll(step, 1)) / 2.0))


def _sides_touched(cells: Ints, named: list[tuple[Ints, str]], corners: set[int]) -> tuple[str, ...]:
    """Name sides of which the run holds more than a corner, or those of the corner where it is all there is."""
    run = set(cells.tolist())
    owned = [name for edge, name in named if (run - corners) & set(edge.tolist())]
    return tuple(dict.fromkeys(owned or [name for edge, name in named if run & set(edge.tolist())]))
