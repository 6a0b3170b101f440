"""The compiled moving window: each cell from exactly its own nearest stations, by the rule the user set."""

from __future__ import annotations

import numpy as np

from texture.predict.block import (
    block_size,
    cell_distances,
    column_width,
    finish,
    gather,
    padded,
    prepare,
    solve_block,
    station_distances,
)
from texture.predict.neighbours import DEPTH, nearest
from texture.structure.jit import compiled

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
def choose_nearest(
    points: np.ndarray,
    nodes: np.ndarray,
    splits: np.ndarray,
    order: np.ndarray,
    place: np.ndarray,
    k: int,
    radius2: float,
    per_sector: int,
    stack: np.ndarray,
    offsets: np.ndarray,
    station: np.ndarray,
) -> int:
    """Stations of one place, nearest first: at most k, within a radius, at most `per_sector` (0: any) per sector."""
    n = points.shape[0]
    wanted = min(n, k if per_sector == 0 else 4 * k)
    while True:
        heap, index = np.empty(wanted), np.empty(wanted, dtype=np.int64)
        found = nearest(points, nodes, splits, order, place, wanted, radius2, heap, index, stack, offsets)
        ranked = np.argsort(heap[:found], kind="mergesort")
        if per_sector == 0:
            for i in range(found):
                station[i] = index[ranked[i]]
            return found
        taken = np.zeros(64, dtype=np.int64)
        count = 0
        for i in range(found):
            s = index[ranked[i]]
            sector = _sector(points, s, place)
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
    first: int,
    last: int,
    cells: np.ndarray,
    cell_drift: np.ndarray,
    cell_global: np.ndarray,
    points: np.ndarray,
    nodes: np.ndarray,
    splits: np.ndarray,
    order: np.ndarray,
    k: int,
    radius2: float,
    at_least: int,
    per_sector: int,
    structures: np.ndarray,
    structure_count: np.ndarray,
    small_scale: np.ndarray,
    survey_variance: np.ndarray,
    noise: np.ndarray,
    survey: np.ndarray,
    station_columns: np.ndarray,
    drifts: int,
    global_covariance: np.ndarray,
    mean: np.ndarray,
    variance: np.ndarray,
    rung: np.ndarray,
    repairs: np.ndarray,
) -> None:
    """Krige cells first..last, each from its own nearest stations; arguments as in `krige_tiles`.

    Where the rule finds fewer than `at_least` stations the k nearest serve, however far, and `rung` is 1.
    """
    v, q, g = structures.shape[0], station_columns.shape[2], cell_global.shape[1]
    values = q - drifts - g
    n, d = points.shape
    k = min(k, n)
    most, lanes = padded(k), block_size(1)
    stack, offsets = np.empty(DEPTH, dtype=np.int64), np.empty((DEPTH, d + 1))
    station = np.empty(k, dtype=np.int64)
    between_all, u_all = np.empty(most * most), np.empty(most * most)
    diagonal, dropped = np.empty(most), np.empty(most, dtype=np.bool_)
    columns = np.empty((most, column_width(q)))
    normal = np.zeros((q, max(drifts, 1)))
    distance_all, w_all = np.empty(most * lanes), np.empty(most * lanes)
    sums = np.empty((q + 1, lanes))
    place = np.empty((d, lanes))
    at_drift, at_global = np.empty((drifts, lanes)), np.empty((g, lanes))
    which = np.empty(1, dtype=np.int64)
    for at in range(first, last):
        count = choose_nearest(
            points, nodes, splits, order, cells[at], k, radius2, per_sector, stack, offsets, station
        )  # fmt: skip
        rung[at] = 0
        if count < at_least:
            rung[at] = 1
            count = choose_nearest(points, nodes, splits, order, cells[at], k, np.inf, 0, stack, offsets, station)
        m = padded(count)
        between, u = between_all[: m * m].reshape(m, m), u_all[: m * m].reshape(m, m)
        distance, w = distance_all[: count * lanes], w_all[: m * lanes].reshape(m, lanes)
        station_distances(points, station[:count], between)
        which[0] = at
        cell_distances(points, station[:count], cells, which, place, distance.reshape(count, lanes))
        gather(which, cell_drift, at_drift)
        gather(which, cell_global, at_global)
        repaired = 0
        for c in range(v):
            nested = structures[c, : structure_count[c]]
            redundant = prepare(
                station[:count], between, nested, small_scale[c], survey_variance[c], noise[c], survey,
                station_columns[c], drifts, u, diagonal[:m], dropped[:m], columns[:m], normal,
            )  # fmt: skip
            solve_block(
                u, count, dropped, redundant, nested, small_scale[c], distance, columns, q, w, sums
            )  # fmt: skip
            sill = small_scale[c] + nested[:, 1].sum()
            finish(sums, sill, normal, drifts, values, at_drift, at_global, global_covariance[c])
            variance[at, c] = sums[0, 0]
            for j in range(values):
                mean[at, c, j] = sums[1 + drifts + j, 0]
            repaired += redundant
        if repaired > 0:
            repairs[0] += 1
            repairs[1] += repaired
