"""How the cells of an unstructured mesh hang together, whether values sit on faces or on nodes."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from texture.targets.openings import COMPASS, Opening, Run, compass_names, sort_openings

if TYPE_CHECKING:
    from texture.targets.target import Target

__all__ = ["Mesh"]

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Mesh:
    """Faces between nodes.

    Attributes
    ----------
    faces : int array, shape (f, k)
        Nodes of each face in order around it, −1 behind the last of a face with fewer than k.
    node_longitude, node_latitude : float arrays, shape (p,)
    location : {"face", "node"}
        Whether a cell is a face, or a node with the parts of its faces that are nearest to it.
    """

    faces: Ints
    node_longitude: Floats
    node_latitude: Floats
    location: Literal["face", "node"] = "face"

    @property
    def corner_counts(self) -> Ints:
        """Corners of each face, shape (f,)."""
        return np.asarray((self.faces >= 0).sum(axis=1))

    @cached_property
    def padded(self) -> Ints:
        """Nodes of each face with the last one repeated where there are fewer, shape (f, k)."""
        column = np.minimum(np.arange(self.faces.shape[1]), self.corner_counts[:, None] - 1)
        return np.take_along_axis(self.faces, column, axis=1)

    @cached_property
    def _sides_of_faces(self) -> tuple[Ints, Ints, Ints]:
        """Every side of every face: the face, its two nodes in order around it."""
        k = self.faces.shape[1]
        counts = self.corner_counts
        position = np.arange(k)
        real = position < counts[:, None]
        following = np.where(position + 1 < counts[:, None], position + 1, 0)
        first, second = self.padded, np.take_along_axis(self.padded, following, axis=1)
        face = np.broadcast_to(np.arange(len(self.faces))[:, None], self.faces.shape)
        return face[real], first[real], second[real]

    @cached_property
    def _pairs(self) -> tuple[Ints, Ints, Ints]:
        """Neighbouring faces, and the sides that belong to one face only (as positions among all sides)."""
        face, a, b = self._sides_of_faces
        key = np.minimum(a, b) * (self.node_longitude.size + 1) + np.maximum(a, b)
        order = np.argsort(key, kind="stable")
        same = key[order][1:] == key[order][:-1]
        left, right = order[:-1][same], order[1:][same]
        alone = np.ones(key.size, dtype=bool)
        alone[left] = alone[right] = False
        return face[left], face[right], np.flatnonzero(alone)

    def edges(self) -> Ints:
        """Pairs of cells that share a side (faces), or are joined by one (nodes), shape (m, 2)."""
        if self.location == "face":
            left, right, _ = self._pairs
            return np.column_stack([left, right])
        _, a, b = self._sides_of_faces
        return np.unique(np.column_stack([np.minimum(a, b), np.maximum(a, b)]), axis=0)

    def pieces(self) -> tuple[Floats, Floats, Ints]:
        """Polygons that the cells are made of: longitude (m, k), latitude (m, k), and the cell of each (m,).

        A node's cell is made of one quadrilateral of each face around it: node, middle of the next side, middle of
        the face, middle of the side before (the median dual).
        """
        lon, lat = self.node_longitude[self.padded], self.node_latitude[self.padded]
        if self.location == "face":
            return lon, lat, np.arange(len(self.faces), dtype=np.int64)
        counts = self.corner_counts[:, None]
        position = np.arange(self.faces.shape[1])
        real = position < counts
        after = np.where(position + 1 < counts, position + 1, 0)
        before = np.where(position > 0, position - 1, counts - 1)
        quads = []
        for x in (lon, lat):
            middle = np.where(real, x, 0.0).sum(axis=1, keepdims=True) / counts
            next_middle = (x + np.take_along_axis(x, after, axis=1)) / 2.0
            last_middle = (x + np.take_along_axis(x, before, axis=1)) / 2.0
            quads.append(np.stack([x, next_middle, np.broadcast_to(middle, x.shape), last_middle], axis=-1)[real])
        return quads[0], quads[1], self.padded[real]

    def sides(self, target: Target) -> dict[str, Bools]:
        """Cells on the outer edge, by the compass point nearest to its outward direction there."""
        by_side = {name: np.zeros(target.n_cells, dtype=bool) for name in COMPASS}
        for position, side in zip(self._pairs[2], self._outward(target), strict=True):
            by_side[COMPASS[int(side)]][self._cells_of(int(position))] = True
        return by_side

    def openings(self, target: Target) -> tuple[Opening, ...]:
        """Runs of the outer edge beside water that have no land on their other side.

        Without land polygons a mesh does not tell its coast from its open boundary: all of it is open.
        """
        face, a, b = self._sides_of_faces
        alone, side = self._pairs[2], self._outward(target)
        wet = (
            target.active[face[alone]] if self.location == "face" else target.active[a[alone]] & target.active[b[alone]]
        )
        if target.land is not None:
            from texture.targets.land import on_land

            wet &= ~on_land(target.land, *self._beyond(alone))
        alone, side = alone[wet], side[wet]
        length = _length_m(self, a[alone], b[alone])
        runs: list[Run] = []
        for members in _chains(a[alone], b[alone]):
            cells = np.concatenate([self._cells_of(int(k)) for k in alone[members]])
            names = tuple(dict.fromkeys(COMPASS[int(k)] for k in side[members]))
            runs.append((cells[np.sort(np.unique(cells, return_index=True)[1])], float(length[members].sum()), names))
        return sort_openings(runs, target.inlet_width_m)

    def _cells_of(self, position: int) -> Ints:
        face, a, b = self._sides_of_faces
        return face[[position]] if self.location == "face" else np.array([a[position], b[position]])

    def _outward(self, target: Target) -> Ints:
        """Compass point of the outward direction of each side that belongs to one face."""
        lon, lat = self._beyond(self._pairs[2], steps=1.0)
        lon0, lat0 = self._beyond(self._pairs[2], steps=0.0)
        return compass_names((lon - lon0) * np.cos(np.radians(lat0)), lat - lat0)

    def _beyond(self, alone: Ints, steps: float = 0.25) -> tuple[Floats, Floats]:
        """Points outside sides: their middle, moved away from the middle of the face by a part of that distance."""
        face, a, b = self._sides_of_faces
        result = []
        for x in (self.node_longitude, self.node_latitude):
            middle = (x[a[alone]] + x[b[alone]]) / 2.0
            inside = np.where(self.faces >= 0, x[self.padded], 0.0).sum(axis=1) / self.corner_counts
            result.append(middle + steps * (middle - inside[face[alone]]))
        return result[0], result[1]


def _length_m(mesh: Mesh, a: Ints, b: Ints) -> Floats:
    import pyproj

    lon, lat = mesh.node_longitude, mesh.node_latitude
    return np.asarray(pyproj.Geod(ellps="WGS84").inv(lon[a], lat[a], lon[b], lat[b])[2])


def _chains(a: Ints, b: Ints) -> list[Ints]:
    """Group sides that share nodes; each group is given in order along it where it is a simple line."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    if a.size == 0:
        return []
    nodes, position = np.unique(np.concatenate([a, b]), return_inverse=True)
    first, second = position[: a.size], position[a.size :]
    graph = coo_array((np.ones(a.size), (first, second)), shape=(nodes.size, nodes.size))
    _, label = connected_components(graph, directed=False)
    return [_in_order(np.flatnonzero(label[first] == k), first, second) for k in range(label.max() + 1)]


def _in_order(members: Ints, first: Ints, second: Ints) -> Ints:
    """Sides of one chain from one end to the other: faces are wound one way, so each side leads to the next."""
    leaving = {int(first[m]): int(m) for m in members}
    starts = [int(m) for m in members if int(first[m]) not in {int(second[k]) for k in members}]
    here: int | None = starts[0] if starts else int(members[0])
    ordered: list[int] = []
    seen: set[int] = set()
    while here is not None and here not in seen:
        ordered.append(here)
        seen.add(here)
        here = leaving.get(int(second[here]))
    return np.array(ordered + [int(m) for m in members if int(m) not in seen], dtype=np.int64)
