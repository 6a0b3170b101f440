"""Tiles overlap, and answers are averaged where they do, so that the map is a continuous function of position.

A place near an edge is kriged from each tile that reaches it; the weights go smoothly to zero at each tile's outer end
and add up to one (a partition of unity; Babuška & Melenk 1997). The averaged variances are at least the variance of the
averaged prediction, since a variance is convex: what they are too much is at most a quarter of the squared difference
of two tiles' answers, some thousandths of the variance.
"""

from __future__ import annotations

import numpy as np

from texture.compiling import compiled
from texture.predict.cuts import Boxes, Cuts
from texture.predict.neighbours import DEPTH

__all__ = ["average", "count_tiles", "list_tiles", "sort_by_tile"]


@compiled
def _weight(boxes: Boxes, tile: int, place: np.ndarray) -> float:
    """Weight of a tile at a place before all weights are made to add up to one; 0 outside its reach.

    The product over dimensions of a cubic that rises from 0 to 1 across the band around each side.
    """
    d = place.size
    lowest, highest = boxes.low[tile], boxes.high[tile]
    weight = 1.0
    for j in range(d):
        band = boxes.overlap[tile] * (highest[j] - lowest[j])
        if band == 0.0:
            continue  # all stations agree in this coordinate
        inside = min(place[j] - lowest[j], highest[j] - place[j])
        along = 0.5 * (inside / band + 1.0)
        if along <= 0.0:
            return 0.0
        if along < 1.0:
            weight *= along * along * (3.0 - 2.0 * along)
    return weight


@compiled
def _visit(cuts: Cuts, boxes: Boxes, place: np.ndarray, stack: np.ndarray, tile: np.ndarray, weight: np.ndarray) -> int:
    """Tiles that reach a place inside the outermost box, in the order of the tree; returns how many.

    They are listed as far as `tile` and `weight` have room.
    """
    found = 0
    stack[0] = 0
    depth = 1
    while depth > 0:
        depth -= 1
        at = stack[depth]
        while cuts.nodes[at, 0] >= 0:
            x = place[cuts.nodes[at, 0]]
            left, right = x <= cuts.reach[at, 0], x >= cuts.reach[at, 1]
            if left and right:
                stack[depth] = cuts.nodes[at, 2]
                depth += 1
            at = cuts.nodes[at, 1] if left else cuts.nodes[at, 2]
        own = _weight(boxes, cuts.nodes[at, 1], place)
        if own > 0.0:
            if found < tile.size:
                tile[found], weight[found] = cuts.nodes[at, 1], own
            found += 1
    return found


@compiled
def _clamp(cuts: Cuts, place: np.ndarray, out: np.ndarray) -> None:
    """The point of the box of all tiles that is nearest to a place: outermost tiles serve all beyond."""
    for j in range(place.size):
        out[j] = min(max(place[j], cuts.low[j]), cuts.high[j])


@compiled
def count_tiles(cuts: Cuts, boxes: Boxes, places: np.ndarray, first: int, last: int, many: np.ndarray) -> None:
    """How many tiles serve each of the places first..last, into `many` (n,)."""
    stack, at = np.empty(DEPTH, dtype=np.int64), np.empty(places.shape[1])
    tile, weight = np.empty(0, dtype=np.int64), np.empty(0)
    for i in range(first, last):
        _clamp(cuts, places[i], at)
        many[i] = _visit(cuts, boxes, at, stack, tile, weight)


@compiled
def list_tiles(
    cuts: Cuts,
    boxes: Boxes,
    places: np.ndarray,
    first: int,
    last: int,
    begin: np.ndarray,
    tile: np.ndarray,
    weight: np.ndarray,
) -> None:
    """Tiles of each of the places first..last, from `begin` on, and their weights, which add up to one for each place."""
    stack, at = np.empty(DEPTH, dtype=np.int64), np.empty(places.shape[1])
    for i in range(first, last):
        _clamp(cuts, places[i], at)
        part = weight[begin[i] : begin[i + 1]]
        _visit(cuts, boxes, at, stack, tile[begin[i] : begin[i + 1]], part)
        total = 0.0
        for p in range(part.size):
            total += part[p]
        for p in range(part.size):
            part[p] /= total


@compiled
def sort_by_tile(tiles: int, begin: np.ndarray, tile: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Sort pairs of place and tile by tile, in each by place.

    Returns
    -------
    start : (tiles + 1,) where each tile's pairs begin
    which : (p,) place of each sorted pair
    slot : (p,) where each pair of the places' own order stands among the sorted
    """
    start = np.zeros(tiles + 1, dtype=np.int64)
    for p in range(tile.size):
        start[tile[p] + 1] += 1
    for t in range(tiles):
        start[t + 1] += start[t]
    following = start[:-1].copy()
    which, slot = np.empty(tile.size, dtype=np.int64), np.empty(tile.size, dtype=np.int64)
    for i in range(begin.size - 1):
        for p in range(begin[i], begin[i + 1]):
            slot[p] = following[tile[p]]
            which[slot[p]] = i
            following[tile[p]] += 1
    return start, which, slot


@compiled
def average(
    first: int,
    last: int,
    begin: np.ndarray,
    slot: np.ndarray,
    weight: np.ndarray,
    pair_mean: np.ndarray,
    pair_variance: np.ndarray,
    mean: np.ndarray,
    variance: np.ndarray,
) -> None:
    """Weighted averages over the tiles of places first..last: pairs (p, v, c) and (p, v) into (n, v, c) and (n, v)."""
    v, c = pair_mean.shape[1], pair_mean.shape[2]
    for i in range(first, last):
        for k in range(v):
            variance[i, k] = 0.0
            for j in range(c):
                mean[i, k, j] = 0.0
        for p in range(begin[i], begin[i + 1]):
            one, at = weight[p], slot[p]
            for k in range(v):
                variance[i, k] += one * pair_variance[at, k]
                for j in range(c):
                    mean[i, k, j] += one * pair_mean[at, k, j]
