"""The compiled kernel: one neighbourhood and one factor per tile and model, its cells by forward substitution alone."""

from __future__ import annotations

import numpy as np

from texture.predict.block import (
    LANES,
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
from texture.predict.tiles import neighbourhood
from texture.structure.jit import compiled

__all__ = ["factor_stations", "krige_stations", "krige_tiles"]


@compiled
def krige_tiles(
    tile_of_run: np.ndarray,
    run_begin: np.ndarray,
    which: np.ndarray,
    cells: np.ndarray,
    cell_drift: np.ndarray,
    cell_global: np.ndarray,
    points: np.ndarray,
    nodes: np.ndarray,
    splits: np.ndarray,
    order: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    own: np.ndarray,
    neighbours: int,
    capacity: int,
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
    repairs: np.ndarray,
) -> None:
    """Krige runs of cells, each run inside one tile.

    Parameters
    ----------
    tile_of_run : (r,) tile of each run; run_begin : (r + 1,) where its cells begin in `which`
    which : (c,) cell numbers sorted by tile
    cells : (cells, d) in the covariance's metric; cell_drift : (cells, drifts); cell_global : (cells, g)
    points ... own : the tiles, see `texture.predict.tiles.Tiles`
    capacity : most stations of a neighbourhood
    structures : (v, s, 4); structure_count : (v,); small_scale : (v,)
    survey_variance : (v, surveys), 0 where a survey has none
    noise : (v, n); survey : (n,)
    station_columns : (v, n, drifts + values + g)
    global_covariance : (v, g, g)
    mean : (cells, v, values), variance : (cells, v), written
    repairs : (2,) tiles with redundant stations and such stations, added to
    """
    v, q, g = structures.shape[0], station_columns.shape[2], cell_global.shape[1]
    values = q - drifts - g
    most = padded(capacity)
    stamp = np.full(points.shape[0], -1, dtype=np.int64)
    station = np.empty(capacity, dtype=np.int64)
    between_all, u_all = np.empty(most * most), np.empty((v, most * most))
    diagonal, dropped = np.empty(most), np.empty((v, most), dtype=np.bool_)
    columns = np.empty((v, most, column_width(q)))
    normal = np.zeros((v, q, max(drifts, 1)))
    redundant = np.zeros(v, dtype=np.int64)
    distance_all, w_all = np.empty(most * LANES), np.empty(most * LANES)
    sums_all = np.empty((q + 1) * LANES)
    drift_all, global_all = np.empty(drifts * LANES), np.empty(g * LANES)
    place = np.empty((points.shape[1], LANES))
    for run in range(tile_of_run.size):
        tile = tile_of_run[run]
        count = neighbourhood(tile, points, nodes, splits, order, low, high, own, neighbours, stamp, station)
        m = padded(count)
        between = between_all[: m * m].reshape(m, m)
        station_distances(points, station[:count], between)
        for k in range(v):
            redundant[k] = prepare(
                station[:count], between, structures[k, : structure_count[k]], small_scale[k], survey_variance[k],
                noise[k], survey, station_columns[k], drifts, u_all[k, : m * m].reshape(m, m), diagonal[:m],
                dropped[k, :m], columns[k, :m], normal[k],
            )  # fmt: skip
        if redundant.sum() > 0:
            repairs[0] += 1
            repairs[1] += redundant.sum()
        for begin in range(run_begin[run], run_begin[run + 1], LANES):
            block = which[begin : min(begin + LANES, run_begin[run + 1])]
            lanes = block_size(block.size)
            distance, w = distance_all[: count * lanes], w_all[: m * lanes].reshape(m, lanes)
            cell_distances(points, station[:count], cells, block, place, distance.reshape(count, lanes))
            own_sums = sums_all[: (q + 1) * lanes].reshape(q + 1, lanes)
            at_drift, at_global = (
                drift_all[: drifts * lanes].reshape(drifts, lanes),
                global_all[: g * lanes].reshape(g, lanes),
            )
            gather(block, cell_drift, at_drift)
            gather(block, cell_global, at_global)
            for k in range(v):
                nested = structures[k, : structure_count[k]]
                u = u_all[k, : m * m].reshape(m, m)
                solve_block(
                    u, count, dropped[k], redundant[k], nested, small_scale[k], distance, columns[k], q, w,
                    own_sums,
                )  # fmt: skip
                sill = small_scale[k] + nested[:, 1].sum()
                finish(own_sums, sill, normal[k], drifts, values, at_drift, at_global, global_covariance[k])
                for c in range(block.size):
                    variance[block[c], k] = own_sums[0, c]
                    for j in range(values):
                        mean[block[c], k, j] = own_sums[1 + drifts + j, c]


@compiled
def factor_stations(
    points: np.ndarray,
    structures: np.ndarray,
    small_scale: float,
    survey_variance: np.ndarray,
    noise: np.ndarray,
    survey: np.ndarray,
    station_columns: np.ndarray,
    drifts: int,
    u: np.ndarray,
    dropped: np.ndarray,
    columns: np.ndarray,
    normal: np.ndarray,
) -> int:
    """One neighbourhood of all stations: fills `u` (m, m), `dropped`, `columns` and `normal` as `prepare` does."""
    m = u.shape[0]
    station = np.arange(points.shape[0])
    between = np.empty((m, m))
    station_distances(points, station, between)
    return prepare(
        station, between, structures, small_scale, survey_variance, noise, survey, station_columns, drifts, u,
        np.empty(m), dropped, columns, normal,
    )  # fmt: skip


@compiled
def krige_stations(
    first: int,
    last: int,
    cells: np.ndarray,
    cell_drift: np.ndarray,
    cell_global: np.ndarray,
    points: np.ndarray,
    structures: np.ndarray,
    small_scale: float,
    q: int,
    u: np.ndarray,
    dropped: np.ndarray,
    redundant: int,
    columns: np.ndarray,
    drifts: int,
    normal: np.ndarray,
    global_covariance: np.ndarray,
    mean: np.ndarray,
    variance: np.ndarray,
) -> None:
    """Krige cells first..last of one column of values from all stations, factored by `factor_stations`."""
    n, m = points.shape[0], u.shape[0]
    values = q - drifts - cell_global.shape[1]
    station, which = np.arange(n), np.arange(first, last)
    distance_all, w_all = np.empty(m * LANES), np.empty(m * LANES)
    g = cell_global.shape[1]
    sums_all = np.empty((q + 1) * LANES)
    drift_all, global_all = np.empty(drifts * LANES), np.empty(g * LANES)
    place = np.empty((points.shape[1], LANES))
    sill = small_scale + structures[:, 1].sum()
    for begin in range(0, last - first, LANES):
        block = which[begin : min(begin + LANES, last - first)]
        lanes = block_size(block.size)
        distance, w = distance_all[: n * lanes], w_all[: m * lanes].reshape(m, lanes)
        cell_distances(points, station, cells, block, place, distance.reshape(n, lanes))
        own_sums = sums_all[: (q + 1) * lanes].reshape(q + 1, lanes)
        at_drift, at_global = (
            drift_all[: drifts * lanes].reshape(drifts, lanes),
            global_all[: g * lanes].reshape(g, lanes),
        )
        gather(block, cell_drift, at_drift)
        gather(block, cell_global, at_global)
        solve_block(u, n, dropped, redundant, structures, small_scale, distance, columns, q, w, own_sums)
        finish(own_sums, sill, normal, drifts, values, at_drift, at_global, global_covariance)
        for c in range(block.size):
            variance[block[c]] = own_sums[0, c]
            for j in range(values):
                mean[block[c], j] = own_sums[1 + drifts + j, c]
