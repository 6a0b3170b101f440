"""The compiled moving window: each cell from exactly its own nearest stations, by the rule the user set."""

from __future__ import annotations

import numpy as np

from texture.compiling import compiled
from texture.predict.block import Cells, krige_cells, make_lanes
from texture.predict.equations import Models, factor_neighbourhood, make_factors
from texture.predict.neighbours import Tree, make_search, nearest

__all__ = ["choose_nearest", "krige_nearest"]


@compiled
def _sector(points: np.ndarray, station: int, place: np.ndarray) -> int:
    """Orthant of a station as seen from a place (a quadrant in the plane); the first 6 coordinates count."""
    code = 0
    for j in range(min(points.shape[1], 6)):
        if points[station, j] >= place[j]:
            code += 1 << j
    return code


@compiled
def choose_nearest(tree: Tree, place: np.ndarray, k: int, radius2: float, per_sector: int, station: np.ndarray) -> int:
    """Stations of one place, nearest first: at most k, within a radius, at most `per_sector` (0: any) per sector."""
    n = tree.points.shape[0]
    wanted = min(n, k if per_sector == 0 else 4 * k)
    while True:
        search = make_search(tree, wanted)
        found = nearest(tree, place, wanted, radius2, search)
        index, ranked = search.index, np.argsort(search.heap[:found], kind="mergesort")
        if per_sector == 0:
            for i in range(found):
                station[i] = index[ranked[i]]
            return found
        taken = np.zeros(64, dtype=np.int64)
        count = 0
        for i in range(found):
            s = index[ranked[i]]
            sector = _sector(tree.points, s, place)
            if taken[sector] < per_sector and count < k:
                taken[sector] += 1
                station[count] = s
                count += 1
        # A full answer, or no more stations to look at; else look at four times as many.
        if count == k or found < wanted or wanted == n:
            return count
        wanted = min(n, 4 * wanted)


@compiled
def krige_nearest(
    models: Models,
    tree: Tree,
    cells: Cells,
    first: int,
    last: int,
    k: int,
    radius2: float,
    at_least: int,
    per_sector: int,
    mean: np.ndarray,
    variance: np.ndarray,
    rung: np.ndarray,
    repairs: np.ndarray,
) -> None:
    """Krige cells first..last, each from its own nearest stations; results and repairs as in `krige_tiles`.

    Where the rule finds fewer than `at_least` stations the k nearest serve, however far, and `rung` is 1.
    """
    k = min(k, tree.points.shape[0])
    station = np.empty(k, dtype=np.int64)
    factors, lanes = make_factors(models, k), make_lanes(models, k, 16)
    which = np.empty(1, dtype=np.int64)
    for at in range(first, last):
        count = choose_nearest(tree, cells.points[at], k, radius2, per_sector, station)
        rung[at] = 0
        if count < at_least:
            rung[at] = 1
            count = choose_nearest(tree, cells.points[at], k, np.inf, 0, station)
        which[0] = at
        redundant = factor_neighbourhood(models, station[:count], factors)
        krige_cells(models, station[:count], factors, cells, which, lanes, mean[at : at + 1], variance[at : at + 1])
        if redundant > 0:
            repairs[0] += 1
            repairs[1] += redundant
