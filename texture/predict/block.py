"""One neighbourhood and one block of cells: the kriging equations in the form that needs no backward substitution.

With the covariance matrix of the stations K = U'U, w = U'^-1 k for a cell, and the value and drift columns
transformed once in the same way (z~ = U'^-1 z, F~ = U'^-1 F), the kriging mean and variance are

    mean     = w'z~ + d'b            d = f0 - F~'w,  b = (F~'F~)^-1 F~'z~
    variance = C(0) - w'w + d'(F~'F~)^-1 d

Cells go through in blocks of at most `LANES`, and every inner loop runs along the cells of a block: the compiler turns
it into vector instructions, and since no operation mixes cells and fast-math is off, a cell gets the same bits
wherever it stands in whatever batch. Columns stand in the order drift, values, global drift.
"""

from __future__ import annotations

import math

import numpy as np

from texture.structure.compiled import add_structures
from texture.structure.jit import compiled
from texture.structure.linear import factor, forward

__all__ = [
    "LANES",
    "block_size",
    "cell_distances",
    "column_width",
    "finish",
    "gather",
    "padded",
    "prepare",
    "solve_block",
    "station_distances",
]

# Measured with 80 stations: forward substitution makes 43 billion multiply-adds a second with 80 or 40 cells in a
# block and 36 with 64 or 96 (their rows lie a multiple of 512 bytes apart and fall on the same cache sets).
LANES = 80


@compiled
def padded(count: int) -> int:
    """Stations rounded up to the four that the factor takes at a time."""
    return (count + 3) // 4 * 4


@compiled
def column_width(columns: int) -> int:
    """Columns rounded up to two vectors of eight: forward substitution on fewer takes longer."""
    return (columns + 15) // 16 * 16


@compiled
def block_size(cells: int) -> int:
    """Places in a block for so many cells: rounded up to a vector of eight, at least two of them."""
    return max(16, (min(cells, LANES) + 7) // 8 * 8)


@compiled
def station_distances(points: np.ndarray, station: np.ndarray, out: np.ndarray) -> None:
    """Upper triangle of the distances between the stations of one neighbourhood, into `out` (m, m)."""
    count, d = station.size, points.shape[1]
    own = np.empty((d, count))
    for i in range(count):
        for a in range(d):
            own[a, i] = points[station[i], a]
    for i in range(count):
        row = out[i, i:count]
        for j in range(row.size):
            row[j] = 0.0
        for a in range(d):
            x = own[a, i]
            others = own[a, i:]
            for j in range(row.size):
                step = x - others[j]
                row[j] += step * step
        for j in range(row.size):
            row[j] = math.sqrt(row[j])


@compiled
def prepare(
    station: np.ndarray,
    between: np.ndarray,
    structures: np.ndarray,
    small_scale: float,
    survey_variance: np.ndarray,
    noise: np.ndarray,
    survey: np.ndarray,
    station_columns: np.ndarray,
    drifts: int,
    u: np.ndarray,
    own: np.ndarray,
    dropped: np.ndarray,
    columns: np.ndarray,
    normal: np.ndarray,
) -> int:
    """Factor of one neighbourhood for one model, and its transformed columns; returns the redundant stations.

    Parameters
    ----------
    station : (count,) stations, padded below to m
    between : (m, m) distances, upper triangle
    survey_variance : (surveys,); noise, survey : (n,) of all stations
    station_columns : (n, q) of all stations
    u : (m, m), own : (m,), dropped : (m,) bool, columns : (m, width), normal : (q, drifts), written
        `normal` holds the Cholesky factor of F~'F~ in its first rows and each further column's drift coefficients
        below. A drift column that the neighbourhood cannot tell from the earlier ones has 0 on the diagonal there and
        is left out.
    """
    count, m, q = station.size, u.shape[0], station_columns.shape[1]
    for i in range(m):
        for j in range(columns.shape[1]):
            columns[i, j] = station_columns[station[i], j] if i < count and j < q else 0.0
        if i >= count:
            for j in range(i, m):
                u[i, j] = 0.0
            u[i, i] = 1.0
            own[i] = 0.0
            continue
        add_structures(structures, small_scale, between[i, i:count], u[i, i:count])
        offset = survey_variance[survey[station[i]]]
        if offset > 0.0:
            for j in range(i, count):
                if survey[station[j]] == survey[station[i]]:
                    u[i, j] += offset
        u[i, i] += noise[station[i]]
        for j in range(count, m):
            u[i, j] = 0.0
        own[i] = u[i, i]
    redundant = factor(u, own, dropped)
    if redundant > 0:
        for i in range(m):
            if dropped[i]:
                for j in range(q):
                    columns[i, j] = 0.0
    forward(u, columns)
    _normal_equations(columns, q, drifts, normal)
    return redundant


@compiled
def _product(columns: np.ndarray, a: int, b: int) -> float:
    total = 0.0
    for i in range(columns.shape[0]):
        total += columns[i, a] * columns[i, b]
    return total


@compiled
def _normal_equations(columns: np.ndarray, q: int, drifts: int, normal: np.ndarray) -> None:
    """Cholesky factor of the drift's normal matrix and the drift coefficients of all further columns."""
    for a in range(drifts):
        for b in range(a + 1):
            size = _product(columns, a, b)
            total = size
            for c in range(b):
                total -= normal[a, c] * normal[b, c]
            if a != b:
                normal[a, b] = total / normal[b, b] if normal[b, b] > 0.0 else 0.0
            else:
                # 1e-10: a column that differs from the others by less than 1e-5 of its length tells nothing here.
                normal[a, a] = math.sqrt(total) if total > 1e-10 * size else 0.0
    for j in range(drifts, q):
        for a in range(drifts):
            total = _product(columns, a, j)
            for c in range(a):
                total -= normal[a, c] * normal[j, c]
            normal[j, a] = total / normal[a, a] if normal[a, a] > 0.0 else 0.0
        for a in range(drifts - 1, -1, -1):
            if normal[a, a] == 0.0:
                normal[j, a] = 0.0
                continue
            total = normal[j, a]
            for c in range(a + 1, drifts):
                total -= normal[c, a] * normal[j, c]
            normal[j, a] = total / normal[a, a]


@compiled
def cell_distances(
    points: np.ndarray, station: np.ndarray, cells: np.ndarray, which: np.ndarray, place: np.ndarray, out: np.ndarray
) -> None:
    """Distances of a block's cells to the stations, into `out` (count, lanes); spare lanes repeat the last cell."""
    d, lanes, used = points.shape[1], out.shape[1], which.size
    for c in range(lanes):
        at = which[min(c, used - 1)]
        for a in range(d):
            place[a, c] = cells[at, a]
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
def solve_block(
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
def gather(which: np.ndarray, source: np.ndarray, out: np.ndarray) -> None:
    """Columns of `source` (cells, p) at a block's cells, into rows of `out` (p, lanes); spare lanes repeat the last."""
    used = which.size
    for c in range(out.shape[1]):
        at = which[min(c, used - 1)]
        for a in range(out.shape[0]):
            out[a, c] = source[at, a]


@compiled
def finish(
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
