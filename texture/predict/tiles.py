"""Tiles: space cut by the stations alone, so that a prediction is a function of position and of nothing else.

A median split of the stations gives leaves of at most eight. A leaf whose longest side exceeds the distance from its
centre to the k-th nearest station is halved until it does not: a tile in a gap beside dense data then shrinks to
the data's own spacing along the edge and grows with distance from it, and no single set of stations has to serve
places that would choose different ones. Which stations serve a tile says `texture.predict.union`; what holds where
tiles meet, `texture.predict.overlap`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from texture.predict.cuts import Boxes, Cuts, cut_space
from texture.predict.neighbours import Tree, build_tree
from texture.predict.overlap import count_tiles, list_tiles
from texture.predict.union import LEAF, capacity, neighbourhood

__all__ = ["Tiles", "build_tiles"]

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

# A tile is not halved below this part of the whole extent: 32 samples at one place would otherwise never stop it.
LEAST_SIDE = 1e-4


@dataclass(frozen=True)
class Tiles:
    """Stations, tiles, and which tiles serve a place.

    Parameters
    ----------
    tree : Tree
        Of the stations in the covariance's metric.
    neighbours : int
        Nearest stations taken at each probe of a tile.
    cuts : Cuts
    boxes : Boxes
    """

    tree: Tree
    neighbours: int
    cuts: Cuts
    boxes: Boxes

    def __len__(self) -> int:
        return len(self.boxes.low)

    def serving(self, places: Array) -> tuple[Ints, Ints, Array]:
        """Which tiles serve each place, and with what weight.

        Returns
        -------
        begin : int array, shape (n + 1,)
            Place i is served by the tiles begin[i] to begin[i + 1].
        tile : int array, weight : float array
            The weights of a place add up to one.
        """
        many = np.empty(len(places), dtype=np.int64)
        count_tiles(self.cuts, self.boxes, places, 0, len(places), many)
        begin = np.concatenate([[0], np.cumsum(many)])
        tile, weight = np.empty(begin[-1], dtype=np.int64), np.empty(begin[-1])
        list_tiles(self.cuts, self.boxes, places, 0, len(places), begin, tile, weight)
        return begin, tile, weight

    def stations(self, tile: int) -> Ints:
        """Stations of a tile's neighbourhood, in the order in which the kernel uses them."""
        n = len(self.tree.points)
        out = np.empty(capacity(self.tree.points.shape[1], self.neighbours, n), dtype=np.int64)
        stamp = np.full(n, -1, dtype=np.int64)
        return out[: neighbourhood(tile, self.tree, self.boxes, self.neighbours, stamp, out)]


def build_tiles(points: Array, neighbours: int) -> Tiles:
    """Cut space into tiles for stations (n, d) given in the covariance's metric."""
    tree = build_tree(points, LEAF)
    low, high = points.min(axis=0), points.max(axis=0)
    if points.shape[1] <= 2:
        # Beyond the stations the rule of the module's first paragraph goes on for one extent, then the last tile serves.
        margin = np.linalg.norm(high - low)
        low, high = low - margin, high + margin
    least = LEAST_SIDE * float(np.max(high - low))
    cuts, boxes = cut_space(tree, low, high, min(neighbours, len(points)), least)
    return Tiles(tree, neighbours, cuts, boxes)
