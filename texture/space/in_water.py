"""Distance through water as plain distance: shortest ways around land, laid out flat again in a few dimensions.

Only the largest connected water is laid out; a pond beside it has no way to it and is told apart.

A covariance that is valid for plain distance is not valid for path length; laid out by multidimensional scaling it is valid again,
and nearly the same distance (Løland & Høst 2003, "Spatial covariance modelling in a complex coastal domain by
multidimensional scaling", Environmetrics 14).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from texture.space.fields import MISSING, Grid
from texture.space.lattice import Lattice
from texture.space.paths import largest_water, water_graph, ways_from
from texture.space.scaling import Scaling, stress

__all__ = ["Apart", "InWater"]

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Ints = NDArray[np.int64]

LANDMARKS = 80
CHECKS = 24  # further nodes whose ways are compared with the layout; they shape nothing
SHORT = 0.15  # of the longest way: pairs nearer than this are short, and kriging lives on them
MOST_DIMENSIONS = 4
LEAST_GAIN = 0.9  # another dimension is taken if it lowers the stress of short pairs to this part or below
LEAST_SHARE = 0.9  # of the cells, that have to lie in the largest water
NEAR = 3.0  # steps; a place further than that from the water cannot be said to lie in it


@dataclass(frozen=True)
class Apart:
    """Why there is no distance through water.

    Attributes
    ----------
    places : int
        How many of the places asked for lie off the largest water.
    of : int
    """

    places: int
    of: int


@dataclass(frozen=True, eq=False)
class InWater:
    """Points of the plane laid out so that plain distance is nearly the way through water; made by `lay_out`.

    Attributes
    ----------
    lattice : Lattice
    eigenvalues : float array, shape (l,)
        See `Scaling`.
    stress_by_dimension : tuple of float
        Stress of short pairs with 1, 2, … dimensions; the layout has `dimensions` of them.
    stress_all : float
        Stress of pairs at all distances, with the dimensions taken.
    pairs : int
        Short pairs that it was judged by.
    short_m : float
        The longest way that counts as short.
    detour : float
        Mean length of the ways over the straight lines, of all pairs looked at: 1 in open water.
    """

    lattice: Lattice
    eigenvalues: Floats
    stress_by_dimension: tuple[float, ...]
    stress_all: float
    pairs: int
    short_m: float
    detour: float
    _water: Bools
    _ways: Floats
    _scaling: Scaling
    _tree: Any
    _coordinates: tuple[Grid, ...]

    @classmethod
    def lay_out(cls, lattice: Lattice, wet: Bools, places: Floats) -> InWater | Apart:
        """Find ways through the water of a lattice and lay them out.

        Parameters
        ----------
        lattice : Lattice
        wet : bool array, shape (count,)
            Nodes that are water.
        places : float array, shape (m, 2)
            Cells; nine in ten must lie in the largest connected water or within three steps of it.

        Returns
        -------
        InWater, or Apart where they do not
        """
        from scipy.spatial import cKDTree

        graph = water_graph(wet.reshape(lattice.shape), lattice.step_m)
        water = largest_water(graph, wet)
        nodes = lattice.nodes
        mine = np.flatnonzero(water)
        tree = cKDTree(nodes[mine])
        off = tree.query(places)[0] > NEAR * lattice.step_m
        if off.mean() > 1.0 - LEAST_SHARE:
            return Apart(int(off.sum()), len(places))
        ways, landmarks = _landmarks(graph, mine, min(LANDMARKS, mine.size))
        longest = float(ways[:, mine].max())
        checks = mine[np.linspace(0, mine.size - 1, min(CHECKS, mine.size)).astype(np.int64)]
        check_ways = ways_from(graph, checks)[:, mine]
        between = ways[:, landmarks]
        short = (check_ways > 3.0 * lattice.step_m) & (check_ways <= SHORT * longest)
        others = check_ways > 0.0
        by_dimension: list[float] = []
        taken = Scaling.of(between, 1)
        stress_all = 0.0
        for k in range(1, MOST_DIMENSIONS + 1):
            scaling = Scaling.of(between, k)
            if scaling.dimensions < k:
                break
            laid = scaling.place(ways[:, mine].T)
            found = np.array([np.linalg.norm(laid - laid[np.searchsorted(mine, c)], axis=1) for c in checks])
            by_dimension.append(stress(check_ways[short], found[short]) if short.any() else 0.0)
            # The plane has two dimensions; a third or fourth has to earn its place.
            if k <= 2 or by_dimension[-1] <= LEAST_GAIN * min(by_dimension[:-1]):
                taken, stress_all = scaling, stress(check_ways[others], found[others])
        straight = np.linalg.norm(nodes[checks][:, None] - nodes[mine][None], axis=2)
        return cls(
            lattice, taken.eigenvalues, tuple(by_dimension), stress_all, int(short.sum()), SHORT * longest,
            float(check_ways[others].mean() / straight[others].mean()), water, ways, taken, tree,
            _node_coordinates(lattice, water, taken, ways),
        )  # fmt: skip

    @property
    def dimensions(self) -> int:
        """Coordinates of the layout."""
        return self._scaling.dimensions

    @property
    def stress(self) -> float:
        """Stress of short pairs with the dimensions taken."""
        return self.stress_by_dimension[self.dimensions - 1]

    def apart(self, points: Floats) -> Bools:
        """Which points (m, 2) of the plane lie more than three steps off the water that is laid out."""
        return np.asarray(self._tree.query(points)[0] > NEAR * self.lattice.step_m)

    def at(self, points: Floats) -> Floats:
        """Coordinates of points (m, 2) of the plane, shape (m, k).

        Between water nodes by interpolation; a point without a water node around it is put at the nearest one, and the way
        there is added to all of its distances, but for points that are `apart`: those take the nearest place as it is.
        """
        found = np.empty((len(points), self.dimensions))
        state = np.zeros(len(points), dtype=np.int8)
        for k, grid in enumerate(self._coordinates):
            found[:, k], state = grid.at(points)
        beside = np.flatnonzero((state == MISSING) | ~self._among_water(points))
        if beside.size:
            away, nearest = self._tree.query(points[beside])
            mine = np.flatnonzero(self._water)[nearest]
            away[away > NEAR * self.lattice.step_m] = 0.0
            found[beside] = self._scaling.place(self._ways[:, mine].T + away[:, None])
        return found

    def _among_water(self, points: Floats) -> Bools:
        """Whether one of the four nodes around each point is water."""
        rows, columns = self.lattice.shape
        column = np.floor((points[:, 0] - self.lattice.west_m) / self.lattice.step_m).astype(np.int64)
        row = np.floor((points[:, 1] - self.lattice.south_m) / self.lattice.step_m).astype(np.int64)
        inside = (row >= 0) & (column >= 0) & (row < rows - 1) & (column < columns - 1)
        i, j = np.clip(row, 0, rows - 2), np.clip(column, 0, columns - 2)
        water = self._water.reshape(rows, columns)
        return np.asarray(inside & (water[i, j] | water[i + 1, j] | water[i, j + 1] | water[i + 1, j + 1]))

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers for JSON."""
        return {
            "dimensions": self.dimensions,
            "stress_of_short_pairs": self.stress,
            "stress_by_dimension": list(self.stress_by_dimension),
            "stress_of_all_pairs": self.stress_all,
            "short_pairs": self.pairs,
            "short_m": self.short_m,
            "detour": self.detour,
            "lattice_step_m": self.lattice.step_m,
            "lattice_nodes": self.lattice.count,
            "eigenvalues_m2": [float(f"{v:.6g}") for v in self.eigenvalues],
        }

    def __str__(self) -> str:
        return (
            f"ways through water on a lattice of {self.lattice.step_m:,.0f} m, laid out in {self.dimensions} dimensions: stress of "
            f"short ways (up to {self.short_m / 1000:,.1f} km) {self.stress:.3f}, of all {self.stress_all:.3f}; ways are "
            f"{self.detour:.2f} times as long as straight lines on average"
        )


def _landmarks(graph: Any, mine: Ints, count: int) -> tuple[Floats, Ints]:
    """Landmarks by farthest-first choice, and the ways from each to all nodes: shapes (l, n), (l,)."""
    first = ways_from(graph, mine[:1])[0, mine]
    at = int(first.argmax())  # an end of the water rather than whichever node comes first
    nearest = np.full(mine.size, np.inf)
    ways, landmarks = [], []
    for _ in range(count):
        landmarks.append(int(mine[at]))
        ways.append(ways_from(graph, mine[at : at + 1])[0])
        nearest = np.minimum(nearest, ways[-1][mine])
        at = int(nearest.argmax())
    return np.array(ways), np.array(landmarks, dtype=np.int64)


def _node_coordinates(lattice: Lattice, water: Bools, scaling: Scaling, ways: Floats) -> tuple[Grid, ...]:
    laid = np.full((lattice.count, scaling.dimensions), np.nan)
    laid[water] = scaling.place(ways[:, water].T)
    return tuple(Grid(lattice.x, lattice.y, laid[:, k].reshape(lattice.shape)) for k in range(scaling.dimensions))
