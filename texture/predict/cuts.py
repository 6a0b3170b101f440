"""Cutting space into tiles: the station tree, and below its leaves halves until a tile is small for its surroundings."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from texture.compiling import compiled
from texture.predict.neighbours import DEPTH, Tree, make_search, nearest, partition

__all__ = ["SIDE_OVER_REACH", "Boxes", "Cuts", "cut_space", "stations_within"]

# Longest side of a tile over the distance to the k-th nearest station. Uniform stations give leaves of 0.7 to 0.9;
# only longer ones are halved.
SIDE_OVER_REACH = 1.0


class Boxes(NamedTuple):
    """Boxes of the tiles, and the stations in them.

    Parameters
    ----------
    low, high : float64 arrays, shape (t, d)
        Outermost tiles also serve everything beyond.
    own : int64 array, shape (t, 2)
        Begin and end of the tile's own stations in the tree's order.
    overlap : float64 array, shape (t,)
        How far a tile reaches beyond each side, as a part of that side.
    """

    low: np.ndarray
    high: np.ndarray
    own: np.ndarray
    overlap: np.ndarray


class Cuts(NamedTuple):
    """The tree that ends in tiles.

    Parameters
    ----------
    nodes : int64 array, shape (m, 3)
        Dimension (-1 at a tile), left child or tile number, right child.
    reach : float64 array, shape (m, 2)
        How far the tiles of the left child reach up and those of the right child down, in that dimension.
    low, high : float64 arrays, shape (d,)
        Box of all tiles.
    """

    nodes: np.ndarray
    reach: np.ndarray
    low: np.ndarray
    high: np.ndarray


@compiled
def stations_within(tree: Tree, low: np.ndarray, high: np.ndarray, overlap: float, out: np.ndarray) -> int:
    """How many stations a tile with these sides reaches; they are listed as far as `out` has room."""
    d, count, depth = low.size, 0, 1
    stack = np.empty(DEPTH, dtype=np.int64)
    stack[0] = 0
    while depth > 0:
        depth -= 1
        at = stack[depth]
        while tree.nodes[at, 0] >= 0:
            dim, value = tree.nodes[at, 0], tree.splits[at]
            band = overlap * (high[dim] - low[dim])
            left, right = low[dim] - band <= value, high[dim] + band >= value
            if left and right:
                stack[depth] = tree.nodes[at, 2]
                depth += 1
            at = tree.nodes[at, 1] if left else tree.nodes[at, 2]
        for i in range(tree.nodes[at, 3], tree.nodes[at, 4]):
            inside = True
            for j in range(d):
                band = overlap * (high[j] - low[j])
                inside = inside and low[j] - band <= tree.points[tree.order[i], j] <= high[j] + band
            if inside:
                if count < out.size:
                    out[count] = tree.order[i]
                count += 1
    return count


@compiled
def _overlap(tree: Tree, low: np.ndarray, high: np.ndarray, k: int) -> float:
    """How far a tile reaches beyond each side, as a part of that side: a place lies in two tiles on average.

    In the plane 0.207: a square tile so enlarged still lies within the distance of its side from its centre, and with it
    within the reach of the k-th nearest station there, so that all stations in it are among the tile's own set. In more
    dimensions, where tiles are not halved, it may reach into dense data: half as far then, until 2 k stations are enough.
    """
    d = low.size
    both_sides: float = 2.0 ** (1.0 / d) - 1.0
    part, none = 0.5 * both_sides, np.empty(0, dtype=np.int64)
    if d > 2:
        for _ in range(8):
            if stations_within(tree, low, high, part, none) <= 2 * k:
                return part
            part *= 0.5
    return part


@compiled
def _grow(array: np.ndarray) -> np.ndarray:
    bigger = np.empty((2 * array.shape[0], array.shape[1]), dtype=array.dtype)
    for i in range(array.shape[0]):
        for j in range(array.shape[1]):
            bigger[i, j] = array[i, j]
    return bigger


@compiled
def cut_space(tree: Tree, low: np.ndarray, high: np.ndarray, k: int, least_side: float) -> tuple[Cuts, Boxes]:
    """Tile tree on top of the station tree; the first nodes of both are the same.

    Parameters
    ----------
    low, high : (d,) box of all tiles
    k : stations within whose reach a tile's side must stay
    least_side : shorter tiles are not halved
    """
    points, nodes, splits, order = tree.points, tree.nodes, tree.splits, tree.order
    d = points.shape[1]
    search = make_search(tree, k)
    cuts = np.empty((4 * nodes.shape[0] + 8, 3), dtype=np.int64)
    # Per cut: box low, box high, then begin and end of its stations and its station node (or -1).
    floats = np.empty((cuts.shape[0], 2 * d))
    ints = np.empty((cuts.shape[0], 3), dtype=np.int64)
    boxes = np.empty((2 * nodes.shape[0] + 8, 2 * d))
    own = np.empty((boxes.shape[0], 2), dtype=np.int64)
    for j in range(d):
        floats[0, j], floats[0, d + j] = low[j], high[j]
    ints[0, 0], ints[0, 1], ints[0, 2] = 0, points.shape[0], 0
    count, tiles, at = 1, 0, 0
    centre = np.empty(d)
    while at < count:
        if count + 2 > cuts.shape[0]:
            cuts, floats, ints = _grow(cuts), _grow(floats), _grow(ints)
        node = ints[at, 2]
        dim, value, middle = -1, 0.0, 0
        left, right = -1, -1
        if node >= 0 and nodes[node, 0] >= 0:
            dim, value = nodes[node, 0], splits[node]
            left, right = nodes[node, 1], nodes[node, 2]
            middle = nodes[left, 4]
        else:
            side = 0.0
            for j in range(d):
                centre[j] = 0.5 * (floats[at, j] + floats[at, d + j])
                if floats[at, d + j] - floats[at, j] > side:
                    side, dim = floats[at, d + j] - floats[at, j], j
            if d <= 2 and side > least_side:
                found = nearest(tree, centre, k, np.inf, search)
                reach = SIDE_OVER_REACH * SIDE_OVER_REACH * search.heap[0] if found == k else np.inf
                if side * side <= reach:
                    dim = -1
            else:
                dim = -1
            if dim >= 0:
                value = centre[dim]
                middle = partition(points, order, ints[at, 0], ints[at, 1], dim, value)
        cuts[at, 0] = dim
        if dim < 0:
            if tiles == boxes.shape[0]:
                boxes, own = _grow(boxes), _grow(own)
            cuts[at, 1], cuts[at, 2] = tiles, -1
            for j in range(2 * d):
                boxes[tiles, j] = floats[at, j]
            own[tiles, 0], own[tiles, 1] = ints[at, 0], ints[at, 1]
            tiles += 1
        else:
            cuts[at, 1], cuts[at, 2] = count, count + 1
            for j in range(2 * d):
                floats[count, j] = floats[count + 1, j] = floats[at, j]
            floats[count, d + dim] = value
            floats[count + 1, dim] = value
            ints[count, 0], ints[count, 1], ints[count, 2] = ints[at, 0], middle, left
            ints[count + 1, 0], ints[count + 1, 1], ints[count + 1, 2] = middle, ints[at, 1], right
            count += 2
        at += 1
    done = Boxes(boxes[:tiles, :d].copy(), boxes[:tiles, d:].copy(), own[:tiles].copy(), np.empty(tiles))
    for t in range(tiles):
        done.overlap[t] = _overlap(tree, done.low[t], done.high[t], k)
    return Cuts(cuts[:count].copy(), _reach(cuts[:count], done), low, high), done


@compiled
def _reach(nodes: np.ndarray, boxes: Boxes) -> np.ndarray:
    """`Cuts.reach`, from the tiles upwards: children stand behind their parents."""
    count, d = nodes.shape[0], boxes.low.shape[1]
    lowest, highest = np.empty((count, d)), np.empty((count, d))
    reach = np.empty((count, 2))
    for at in range(count - 1, -1, -1):
        dim, left, right = nodes[at, 0], nodes[at, 1], nodes[at, 2]
        for j in range(d):
            if dim < 0:
                band = boxes.overlap[left] * (boxes.high[left, j] - boxes.low[left, j])
                lowest[at, j], highest[at, j] = boxes.low[left, j] - band, boxes.high[left, j] + band
            else:
                lowest[at, j] = min(lowest[left, j], lowest[right, j])
                highest[at, j] = max(highest[left, j], highest[right, j])
        if dim >= 0:
            reach[at, 0], reach[at, 1] = highest[left, dim], lowest[right, dim]
    return reach
