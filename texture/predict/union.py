"""The stations of a tile: the union of those nearest to a few probes, and some from far away.

All stations near a few probes of a tile (in the plane its corners, edge middles and centre, and always its own stations)
serve the whole tile: the common neighbourhood of Vigsnes et al. (2017). To them come far stations from each branch of
the station tree beside the tile's own: without them a tile between clusters knows one of them only.
"""

from __future__ import annotations

import numpy as np

from texture.predict.cuts import Boxes, overlap_part
from texture.predict.neighbours import DEPTH, Tree, make_search, nearest
from texture.structure.jit import compiled

__all__ = ["LEAF", "capacity", "neighbourhood"]

LEAF = 8


@compiled
def capacity(dimensions: int, neighbours: int, stations: int) -> int:
    """Most stations a neighbourhood can hold."""
    probes = 3**dimensions if dimensions <= 2 else LEAF + 1 + 2 * dimensions
    # Two more for the tile's own stations; a tree of a million stations has 17 levels, each with its far ones.
    return min(stations, (probes + 2) * neighbours + 32 * far_stations(neighbours))


@compiled
def far_stations(neighbours: int) -> int:
    """Far stations taken from each branch of the station tree: 6 for 32 neighbours, in proportion, at least one."""
    return max(1, (3 * neighbours + 8) // 16)


@compiled
def _set_probe(
    number: int,
    points: np.ndarray,
    order: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    own: np.ndarray,
    out: np.ndarray,
) -> bool:
    """Coordinates of a tile's probe; False when there are no more. The centre is always the first."""
    d = low.size
    if d <= 2:
        if number >= 3**d:
            return False
        rest = number
        for j in range(d):
            third = rest % 3  # 0 the middle, 1 the low side, 2 the high side
            rest //= 3
            out[j] = 0.5 * (low[j] + high[j]) if third == 0 else (low[j] if third == 1 else high[j])
        return True
    stations = own[1] - own[0]
    if number >= 1 + 2 * d + stations:
        return False
    if number > 2 * d:
        s = order[own[0] + number - 1 - 2 * d]
        for j in range(d):
            out[j] = points[s, j]
        return True
    for j in range(d):
        out[j] = 0.5 * (low[j] + high[j])
    if number > 0:
        j = (number - 1) // 2
        out[j] = low[j] if number % 2 == 1 else high[j]
    return True


@compiled
def _add(station: int, mark: int, stamp: np.ndarray, out: np.ndarray, count: int) -> int:
    """Append a station that is not yet there, as long as there is room; returns the new count."""
    if stamp[station] == mark or count == out.size:
        return count
    stamp[station] = mark
    out[count] = station
    return count + 1


@compiled
def _add_within(
    tree: Tree, low: np.ndarray, high: np.ndarray, tile: int, most: int, stamp: np.ndarray, out: np.ndarray
) -> int:
    """Append the stations that a tile with these sides reaches, `most` of them at most; returns how many."""
    d, count, depth = low.size, 0, 1
    stack = np.empty(DEPTH, dtype=np.int64)
    stack[0] = 0
    while depth > 0:
        depth -= 1
        at = stack[depth]
        while tree.nodes[at, 0] >= 0:
            dim, value = tree.nodes[at, 0], tree.splits[at]
            band = overlap_part(d) * (high[dim] - low[dim])
            left, right = low[dim] - band <= value, high[dim] + band >= value
            if left and right:
                stack[depth] = tree.nodes[at, 2]
                depth += 1
            at = tree.nodes[at, 1] if left else tree.nodes[at, 2]
        for i in range(tree.nodes[at, 3], tree.nodes[at, 4]):
            station, inside = tree.order[i], True
            for j in range(d):
                band = overlap_part(d) * (high[j] - low[j])
                x = tree.points[station, j]
                inside = inside and low[j] - band <= x <= high[j] + band
            if inside and count < most:
                count = _add(station, tile, stamp, out, count)
    return count


@compiled
def neighbourhood(
    tile: int, tree: Tree, boxes: Boxes, neighbours: int, stamp: np.ndarray, out: np.ndarray
) -> int:
    """Write a tile's stations to `out` and return how many; `stamp` (n,) must hold no value equal to `tile`."""
    points, nodes, splits, order = tree.points, tree.nodes, tree.splits, tree.order
    low, high, own = boxes.low[tile], boxes.high[tile], boxes.own[tile]
    n, d = points.shape
    far = far_stations(neighbours)
    k = min(neighbours, n)
    search = make_search(tree, k)
    index = search.index
    probe = np.empty(d)
    # Every station that the tile reaches, so that each is met exactly; of more than fit, which then stand close
    # together, the first ones.
    count = _add_within(tree, low, high, tile, 2 * neighbours, stamp, out)
    found, number = 0, 0
    while _set_probe(number, points, order, low, high, own, probe):
        bound2 = np.inf
        if found == k:
            # The last probe's stations bound this one's: all k of them lie within their farthest from here.
            bound2 = 0.0
            for i in range(k):
                d2 = 0.0
                for j in range(d):
                    step = probe[j] - points[index[i], j]
                    d2 += step * step
                bound2 = max(bound2, d2)
        found = nearest(tree, probe, k, bound2, search)
        for i in range(found):
            count = _add(index[i], tile, stamp, out, count)
        number += 1
    # Far stations from each branch that the way from the root to the tile's centre leaves aside.
    for j in range(d):
        probe[j] = 0.5 * (low[j] + high[j])
    at = 0
    while nodes[at, 0] >= 0:
        left = probe[nodes[at, 0]] < splits[at]
        aside = nodes[at, 2] if left else nodes[at, 1]
        at = nodes[at, 1] if left else nodes[at, 2]
        begin, size = nodes[aside, 3], nodes[aside, 4] - nodes[aside, 3]
        for part in range(far):
            count = _add(order[begin + (2 * part + 1) * size // (2 * far)], tile, stamp, out, count)
    return count
