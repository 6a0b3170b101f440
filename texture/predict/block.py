"""Cells of one neighbourhood, a block at a time: forward substitution alone gives their means and variances.

Cells go through in blocks of at most `LANES`, and every inner loop runs along the cells of a block: the compiler turns
it into vector instructions, and since no operation mixes cells and fast-math is off, a cell gets the same bits
wherever it stands in whatever batch. The formulas are in `texture.predict.equations`.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from texture.compiling import compiled
from texture.predict.equations import Factors, Models, padded
from texture.structure.compiled import add_structures
from texture.structure.linear import forward

__all__ = ["LANES", "Cells", "Lanes", "block_size", "krige_cells", "make_lanes", "substitute"]

# Measured with 80 stations: forward substitution makes 43 billion multiply-adds a second with 80 or 40 cells in a
# block and 36 with 64 or 96 (their rows lie a multiple of 512 bytes apart and fall on the same cache sets).
LANES = 80


class Cells(NamedTuple):
    """Places to krige: points (c, d) in the covariances' metric, local drift (c, drifts), global drift (c, g)."""

    points: np.ndarray
    drift: np.ndarray
    wide: np.ndarray


class Lanes(NamedTuple):
    """Room for one block of cells, flat: its first part is given the shape that the block has."""

    distance: np.ndarray
    w: np.ndarray
    sums: np.ndarray
    drift: np.ndarray
    wide: np.ndarray
    place: np.ndarray


@compiled
def make_lanes(models: Models, capacity: int, lanes: int) -> Lanes:
    """Room for blocks of at most `lanes` cells and neighbourhoods of at most `capacity` stations."""
    q, most = models.columns.shape[2], padded(capacity)
    return Lanes(
        np.empty(most * lanes),
        np.empty(most * lanes),
        np.empty((q + 1) * lanes),
        np.empty(models.drifts * lanes),
        np.empty((q - models.drifts - models.values) * lanes),
        np.empty(models.points.shape[1] * lanes),
    )


@compiled
def block_size(cells: int) -> int:
    """Places in a block for so many cells: rounded up to a vector of eight, at least two of them."""
    return max(16, (cells + 7) // 8 * 8)


@compiled
def krige_cells(
    models: Models,
    station: np.ndarray,
    factors: Factors,
    cells: Cells,
    which: np.ndarray,
    lanes: Lanes,
    mean: np.ndarray,
    variance: np.ndarray,
) -> None:
    """Krige the cells `which` from one neighbourhood.

    Parameters
    ----------
    station : (count,) stations that `factors` were made for
    which : (c,) rows of `cells`
    lanes : room for blocks; their size decides how many cells go through together, and changes no bit
    mean : (c, v, values), variance : (c, v), written in the order of `which`
    """
    v, q, d = models.columns.shape[0], models.columns.shape[2], models.points.shape[1]
    drifts, values = models.drifts, models.values
    g = q - drifts - values
    count = station.size
    m = padded(count)
    most = lanes.place.size // d
    for begin in range(0, which.size, most):
        block = which[begin : min(begin + most, which.size)]
        size = block_size(block.size)
        distance, w = lanes.distance[: count * size], lanes.w[: m * size].reshape(m, size)
        place, sums = lanes.place[: d * size].reshape(d, size), lanes.sums[: (q + 1) * size].reshape(q + 1, size)
        drift, wide = lanes.drift[: drifts * size].reshape(drifts, size), lanes.wide[: g * size].reshape(g, size)
        _gather(block, cells.points, place)
        _cell_distances(models.points, station, place, distance.reshape(count, size))
        _gather(block, cells.drift, drift)
        _gather(block, cells.wide, wide)
        for k in range(v):
            structures = models.structures[k, : models.structure_count[k]]
            _solve_block(
                factors.u[k, : m * m].reshape(m, m), count, factors.dropped[k], factors.redundant[k], structures,
                models.small_scale[k], distance, factors.columns[k], q, w, sums,
            )  # fmt: skip
            sill = models.small_scale[k] + structures[:, 1].sum()
            _finish(sums, sill, factors.normal[k], drifts, values, drift, wide, models.global_covariance[k])
            for c in range(block.size):
                variance[begin + c, k] = sums[0, c]
                for j in range(values):
                    mean[begin + c, k, j] = sums[1 + drifts + j, c]


@compiled
def _cell_distances(points: np.ndarray, station: np.ndarray, place: np.ndarray, out: np.ndarray) -> None:
    """Distances of a block's places (d, lanes) to the stations, into `out` (count, lanes)."""
    d, lanes = points.shape[1], out.shape[1]
    for i in range(station.size):
        s = station[i]
        row = out[i]
        if d == 2:
            x, y = points[s, 0], points[s, 1]
            east, north = place[0], place[1]
            for c in range(lanes):
                dx, dy = east[c] - x, north[c] - y
                row[c] = math.sqrt(dx * dx + dy * dy)
            continue
        for c in range(lanes):
            row[c] = 0.0
        for a in range(d):
            x = points[s, a]
            along = place[a]
            for c in range(lanes):
                step = along[c] - x
                row[c] += step * step
        for c in range(lanes):
            row[c] = math.sqrt(row[c])


@compiled
def _solve_block(
    u: np.ndarray,
    count: int,
    dropped: np.ndarray,
    redundant: int,
    structures: np.ndarray,
    small_scale: float,
    distance: np.ndarray,
    columns: np.ndarray,
    q: int,
    w: np.ndarray,
    sums: np.ndarray,
) -> None:
    """Covariances of a block's cells, forward substitution, and the sums that mean and variance are made of.

    Parameters
    ----------
    distance : (count * lanes,), w : (m, lanes) workspace
    sums : (1 + q, lanes), written: w'w, then each column's product with w
    """
    m, lanes = w.shape
    flat = w.reshape(m * lanes)
    add_structures(structures, small_scale, distance, flat[: count * lanes])
    for i in range(m):
        if i >= count or (redundant > 0 and dropped[i]):
            row = w[i]
            for c in range(lanes):
                row[c] = 0.0
    substitute(u, columns, q, w, sums)


@compiled
def substitute(u: np.ndarray, columns: np.ndarray, q: int, w: np.ndarray, sums: np.ndarray) -> None:
    """Forward substitution of the right-hand sides `w` (m, lanes) in place, and the sums of squares and products.

    Parameters
    ----------
    sums : (1 + q, lanes), written: w'w, then each transformed column's product with w
    """
    m, lanes = w.shape
    forward(u, w)
    square = sums[0]
    for j in range(q + 1):
        row = sums[j]
        for c in range(lanes):
            row[c] = 0.0
    for i in range(0, m, 4):
        w0, w1, w2, w3 = w[i], w[i + 1], w[i + 2], w[i + 3]
        for c in range(lanes):
            square[c] += (w0[c] * w0[c] + w1[c] * w1[c]) + (w2[c] * w2[c] + w3[c] * w3[c])
        for j in range(q):
            f0, f1, f2, f3 = columns[i, j], columns[i + 1, j], columns[i + 2, j], columns[i + 3, j]
            row = sums[j + 1]
            for c in range(lanes):
                row[c] += (f0 * w0[c] + f1 * w1[c]) + (f2 * w2[c] + f3 * w3[c])


@compiled
def _gather(which: np.ndarray, source: np.ndarray, out: np.ndarray) -> None:
    """Columns of `source` (cells, p) at a block's cells, into rows of `out` (p, lanes); spare lanes repeat the last."""
    used = which.size
    for c in range(out.shape[1]):
        at = which[min(c, used - 1)]
        for a in range(out.shape[0]):
            out[a, c] = source[at, a]


@compiled
def _finish(
    sums: np.ndarray,
    sill: float,
    normal: np.ndarray,
    drifts: int,
    values: int,
    cell_drift: np.ndarray,
    cell_global: np.ndarray,
    global_covariance: np.ndarray,
) -> None:
    """Turn a block's sums into variances (`sums[0]`) and means (`sums[1 + drifts:]`), in place.

    Parameters
    ----------
    cell_drift : (drifts, lanes), cell_global : (g, lanes)
    """
    lanes, wide = sums.shape[1], cell_global.shape[0]
    variance = sums[0]
    for c in range(lanes):
        variance[c] = sill - variance[c]
    for a in range(drifts):
        rest, target = sums[1 + a], cell_drift[a]
        for c in range(lanes):
            rest[c] = target[c] - rest[c]
    for j in range(values + wide):
        row = sums[1 + drifts + j]
        for a in range(drifts):
            rest, f = sums[1 + a], normal[drifts + j, a]
            for c in range(lanes):
                row[c] += rest[c] * f
    for a in range(drifts):
        rest = sums[1 + a]
        for b in range(a):
            before, f = sums[1 + b], normal[a, b]
            for c in range(lanes):
                rest[c] -= f * before[c]
        inverse = 1.0 / normal[a, a] if normal[a, a] > 0.0 else 0.0
        for c in range(lanes):
            rest[c] *= inverse
            variance[c] += rest[c] * rest[c]
    for g in range(wide):
        rest, target = sums[1 + drifts + values + g], cell_global[g]
        for c in range(lanes):
            rest[c] = target[c] - rest[c]
    for g in range(wide):
        for h in range(wide):
            one, other, f = sums[1 + drifts + values + g], sums[1 + drifts + values + h], global_covariance[g, h]
            for c in range(lanes):
                variance[c] += one[c] * f * other[c]
    # What is left of zero at a station without noise is rounding of either sign.
    least = 4e-15 * sill
    for c in range(lanes):
        variance[c] = variance[c] if variance[c] > least else 0.0
