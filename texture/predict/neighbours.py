"""Compiled k-d tree over stations: building it and finding the nearest stations of a place.

Our own because the kernel asks it from inside compiled loops, where scipy's tree cannot be called.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from texture.compiling import compiled

__all__ = ["DEPTH", "Search", "Tree", "build_tree", "make_search", "nearest", "partition"]

# A median split halves the stations, ties aside; 200 levels are never reached by data, and checked.
DEPTH = 200


class Tree(NamedTuple):
    """Stations (n, d) and the tree over them.

    Parameters
    ----------
    points : float64 array, shape (n, d)
    nodes : int64 array, shape (m, 5)
        Split dimension (-1 in a leaf), left child, right child, begin and end of its stations in `order`.
    splits : float64 array, shape (m,)
    order : int64 array, shape (n,)
    low, high : float64 arrays, shape (m, d)
        Smallest box around the stations of each node.
    """

    points: np.ndarray
    nodes: np.ndarray
    splits: np.ndarray
    order: np.ndarray
    low: np.ndarray
    high: np.ndarray


class Search(NamedTuple):
    """Room for a search: squared distances and numbers of what was found, and the nodes still to visit."""

    heap: np.ndarray
    index: np.ndarray  # type: ignore[assignment]  # hides tuple.index, which nothing here asks for
    stack: np.ndarray
    offsets: np.ndarray


@compiled
def make_search(tree: Tree, k: int) -> Search:
    """Room for searches of at most k stations."""
    return Search(
        np.empty(k),
        np.empty(k, dtype=np.int64),
        np.empty(DEPTH, dtype=np.int64),
        np.empty((DEPTH, tree.points.shape[1] + 1)),
    )


@compiled
def _middle(keys: np.ndarray) -> float:
    """The value that would stand at half of `keys` if they were sorted; moves them about (Hoare's selection)."""
    low, high, half = 0, keys.size - 1, keys.size // 2
    while low < high:
        pivot = keys[(low + high) // 2]
        i, j = low, high
        while i <= j:
            while keys[i] < pivot:
                i += 1
            while keys[j] > pivot:
                j -= 1
            if i <= j:
                keys[i], keys[j] = keys[j], keys[i]
                i += 1
                j -= 1
        if half <= j:
            high = j
        elif half >= i:
            low = i
        else:
            break
    value: float = keys[half]
    return value


@compiled
def _split_value(points: np.ndarray, order: np.ndarray, begin: int, end: int, dim: int) -> float:
    """Value that cuts the stations of a node nearest to their middle; those below it go left.

    Returns NaN where all are equal.
    """
    count = end - begin
    keys = np.empty(count)
    for i in range(count):
        keys[i] = points[order[begin + i], dim]
    middle = _middle(keys)
    below, above = -np.inf, np.inf  # the neighbours of the middle value, on either side
    for i in range(count):
        if keys[i] < middle:
            below = max(below, keys[i])
        elif keys[i] > middle:
            above = min(above, keys[i])
    if below > -np.inf:
        value = 0.5 * (below + middle)
        return value if value > below else middle
    if above < np.inf:
        value = 0.5 * (above + middle)
        return value if value > middle else above
    return np.nan


@compiled
def partition(points: np.ndarray, order: np.ndarray, begin: int, end: int, dim: int, value: float) -> int:
    """Move stations below `value` to the front of their node, keeping their order; returns where the rest begins."""
    rest = np.empty(end - begin, dtype=np.int64)
    front, held = begin, 0
    for i in range(begin, end):
        s = order[i]
        if points[s, dim] < value:
            order[front] = s
            front += 1
        else:
            rest[held] = s
            held += 1
    for i in range(held):
        order[front + i] = rest[i]
    return front


@compiled
def build_tree(points: np.ndarray, leaf: int) -> Tree:
    """k-d tree by median splits across the widest extent, at most `leaf` stations in a leaf (more where they coincide)."""
    n, d = points.shape
    order = np.arange(n)
    nodes = np.empty((2 * n + 1, 5), dtype=np.int64)
    splits = np.zeros(2 * n + 1)
    nodes[0, 3], nodes[0, 4] = 0, n
    low, high = np.empty((2 * n + 1, d)), np.empty((2 * n + 1, d))
    count, todo = 1, 0
    while todo < count:
        begin, end = nodes[todo, 3], nodes[todo, 4]
        nodes[todo, 0] = -1
        widest, dim = 0.0, -1
        for k in range(d):
            least, most = np.inf, -np.inf
            for i in range(begin, end):
                x = points[order[i], k]
                least, most = min(least, x), max(most, x)
            low[todo, k], high[todo, k] = least, most
            if most - least > widest:
                widest, dim = most - least, k
        if end - begin > leaf and dim >= 0:
            value = _split_value(points, order, begin, end, dim)
            middle = partition(points, order, begin, end, dim, value)
            nodes[todo, 0], nodes[todo, 1], nodes[todo, 2] = dim, count, count + 1
            splits[todo] = value
            nodes[count, 3], nodes[count, 4] = begin, middle
            nodes[count + 1, 3], nodes[count + 1, 4] = middle, end
            count += 2
        todo += 1
    return Tree(points, nodes[:count].copy(), splits[:count].copy(), order, low[:count].copy(), high[:count].copy())


@compiled
def _sift_down(heap: np.ndarray, index: np.ndarray, size: int) -> None:
    """Restore the max-heap after its root was replaced."""
    at = 0
    key, which = heap[0], index[0]
    while True:
        child = 2 * at + 1
        if child >= size:
            break
        if child + 1 < size and heap[child + 1] > heap[child]:
            child += 1
        if heap[child] <= key:
            break
        heap[at], index[at] = heap[child], index[child]
        at = child
    heap[at], index[at] = key, which


@compiled
def _sift_up(heap: np.ndarray, index: np.ndarray, at: int) -> None:
    key, which = heap[at], index[at]
    while at > 0:
        parent = (at - 1) // 2
        if heap[parent] >= key:
            break
        heap[at], index[at] = heap[parent], index[parent]
        at = parent
    heap[at], index[at] = key, which


@compiled
def nearest(tree: Tree, place: np.ndarray, k: int, bound2: float, search: Search) -> int:
    """The k stations nearest to `place` and within the squared distance `bound2`; unsorted, the farthest first.

    They stand in `search.index`, their squared distances in `search.heap`. Returns how many were found: fewer than k
    where the bound or the number of stations stops it.
    """
    points, nodes, splits, order = tree.points, tree.nodes, tree.splits, tree.order
    heap, index, stack, offsets = search.heap, search.index, search.stack, search.offsets
    d = points.shape[1]
    found = 0
    worst = bound2
    stack[0] = 0
    for i in range(d + 1):
        offsets[0, i] = 0.0
    depth = 1
    while depth > 0:
        depth -= 1
        if offsets[depth, d] > worst:
            continue
        node = stack[depth]
        while nodes[node, 0] >= 0:
            dim = nodes[node, 0]
            step = place[dim] - splits[node]
            near, far = (nodes[node, 1], nodes[node, 2]) if step < 0.0 else (nodes[node, 2], nodes[node, 1])
            # The near child keeps this slot's offsets, the far one waits in the slot above it.
            away = offsets[depth, d] - offsets[depth, dim] + step * step
            if away <= worst:
                for i in range(d + 1):
                    offsets[depth + 1, i] = offsets[depth, i]
                # Swap: the waiting child takes the lower slot so that the stack stays dense.
                offsets[depth, dim] = step * step
                offsets[depth, d] = away
                stack[depth] = far
                depth += 1
            node = near
        for i in range(nodes[node, 3], nodes[node, 4]):
            s = order[i]
            d2 = 0.0
            for j in range(d):
                step = place[j] - points[s, j]
                d2 += step * step
            if d2 <= worst:
                if found < k:
                    heap[found], index[found] = d2, s
                    _sift_up(heap, index, found)
                    found += 1
                    if found == k:
                        worst = min(worst, heap[0])
                elif d2 < worst:
                    heap[0], index[0] = d2, s
                    _sift_down(heap, index, k)
                    worst = heap[0]
    return found
