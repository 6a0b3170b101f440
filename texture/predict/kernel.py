"""The compiled kriging kernel: one Cholesky factor per set of stations, forward substitution alone for its cells.

With the covariance matrix of the stations K = U'U, w = U'^-1 k for a cell, and the value and drift columns
transformed once in the same way (z~ = U'^-1 z, F~ = U'^-1 F), the kriging mean and variance are

    mean     = w'z~ + d'b            d = f0 - F~'w,  b = (F~'F~)^-1 F~'z~
    variance = C(0) - w'w + d'(F~'F~)^-1 d

so no backward substitution, no weights and no n x n array beyond the tile's own. Cells go through in blocks of
`LANES`, and every inner loop runs along the lanes: the compiler turns it into vector instructions, and since no
operation mixes lanes and fast-math is off, a cell gets the same bits wherever it stands in whatever batch.
"""

from __future__ import annotations

import math

import numpy as np

from texture.predict.neighbours import DEPTH, nearest
from texture.predict.tiles import neighbourhood
from texture.structure.compiled import add_structures
from texture.structure.jit import compiled

__all__ = ["LANES", "REDUNDANT", "factor", "factor_stations", "krige_nearest", "krige_stations", "krige_tiles"]

# Cells that go through together: 64 stations x 32 cells x 8 bytes is 16 KiB, half of a small first-level cache.
LANES = 32

# A station whose variance given the stations before it is below this part of its own adds nothing but rounding
# error; it is left out of that neighbourhood and counted. 1e-12 keeps condition numbers to what 1e-8 agreement allows.
REDUNDANT = 1e-12


@compiled
def factor(k: np.ndarray, m: int, dropped: np.ndarray) -> int:
    """Cholesky factor U (K = U'U) in place of the upper triangle of the flat row-major m x m array `k`.

    m is a multiple of 4. Redundant stations get a unit row and are marked in `dropped`; returns their number.
    Works through four rows at a time so that the trailing update makes four multiply-adds per load and store.
    """
    redundant = 0
    for a in range(0, m, 4):
        for r in range(a, a + 4):
            row = r * m
            own = k[row + r]
            # k[row + r] has lost what the rows before explain; its original diagonal stands below it in dropped's twin.
            if not own > REDUNDANT * dropped[m + r]:
                dropped[r] = 1.0
                redundant += 1
                for j in range(r, m):
                    k[row + j] = 0.0
                k[row + r] = 1.0
                continue
            dropped[r] = 0.0
            root = math.sqrt(own)
            inverse = 1.0 / root
            for j in range(r, m):
                k[row + j] *= inverse
            k[row + r] = root
            for i in range(r + 1, a + 4):
                f = k[row + i]
                base = i * m
                for j in range(i, m):
                    k[base + j] -= f * k[row + j]
        r0, r1, r2, r3 = a * m, a * m + m, a * m + 2 * m, a * m + 3 * m
        for i in range(a + 4, m):
            f0, f1, f2, f3 = k[r0 + i], k[r1 + i], k[r2 + i], k[r3 + i]
            base = i * m
            for j in range(i, m):
                k[base + j] -= (f0 * k[r0 + j] + f1 * k[r1 + j]) + (f2 * k[r2 + j] + f3 * k[r3 + j])
    # A redundant station's column in the rows above it would still carry its covariance.
    if redundant > 0:
        for r in range(m):
            if dropped[r] != 0.0:
                for i in range(r):
                    k[i * m + r] = 0.0
    return redundant


@compiled
def forward(u: np.ndarray, m: int, w: np.ndarray, lanes: int) -> None:
    """Solve U'w = w in place for `lanes` right-hand sides; w is flat with LANES places per station."""
    for a in range(0, m, 4):
        w0, w1, w2, w3 = a * LANES, a * LANES + LANES, a * LANES + 2 * LANES, a * LANES + 3 * LANES
        for b in range(0, a, 4):
            v0, v1, v2, v3 = b * LANES, b * LANES + LANES, b * LANES + 2 * LANES, b * LANES + 3 * LANES
            p0, p1, p2, p3 = b * m + a, b * m + m + a, b * m + 2 * m + a, b * m + 3 * m + a
            u00, u01, u02, u03 = u[p0], u[p0 + 1], u[p0 + 2], u[p0 + 3]
            u10, u11, u12, u13 = u[p1], u[p1 + 1], u[p1 + 2], u[p1 + 3]
            u20, u21, u22, u23 = u[p2], u[p2 + 1], u[p2 + 2], u[p2 + 3]
            u30, u31, u32, u33 = u[p3], u[p3 + 1], u[p3 + 2], u[p3 + 3]
            for c in range(lanes):
                x0, x1, x2, x3 = w[v0 + c], w[v1 + c], w[v2 + c], w[v3 + c]
                w[w0 + c] -= (u00 * x0 + u10 * x1) + (u20 * x2 + u30 * x3)
                w[w1 + c] -= (u01 * x0 + u11 * x1) + (u21 * x2 + u31 * x3)
                w[w2 + c] -= (u02 * x0 + u12 * x1) + (u22 * x2 + u32 * x3)
                w[w3 + c] -= (u03 * x0 + u13 * x1) + (u23 * x2 + u33 * x3)
        q0, q1, q2, q3 = a * m + a, a * m + m + a, a * m + 2 * m + a, a * m + 3 * m + a
        i0, i1, i2, i3 = 1.0 / u[q0], 1.0 / u[q1 + 1], 1.0 / u[q2 + 2], 1.0 / u[q3 + 3]
        u01, u02, u03, u12, u13, u23 = u[q0 + 1], u[q0 + 2], u[q0 + 3], u[q1 + 2], u[q1 + 3], u[q2 + 3]
        for c in range(lanes):
            x0 = w[w0 + c] * i0
            x1 = (w[w1 + c] - u01 * x0) * i1
            x2 = (w[w2 + c] - u02 * x0 - u12 * x1) * i2
            x3 = (w[w3 + c] - u03 * x0 - u13 * x1 - u23 * x2) * i3
            w[w0 + c] = x0
            w[w1 + c] = x1
            w[w2 + c] = x2
            w[w3 + c] = x3


@compiled
def _transform(u: np.ndarray, m: int, dropped: np.ndarray, columns: np.ndarray, drifts: int, normal: np.ndarray) -> int:
    """Columns (m, q) become U'^-1 columns; `normal` gets what the drift needs. Returns the drift columns that count.

    The first `drifts` columns are drift. `normal` (q, drifts, ) holds, after the call, in its first `drifts` rows
    the Cholesky factor G of F~'F~ (lower) and below them, for each further column, its drift coefficients.
    Drift columns that the neighbourhood cannot tell from the earlier ones are left out (their diagonal is 0).
    """
    q = columns.shape[1]
    for i in range(m):
        if dropped[i] != 0.0:
            for j in range(q):
                columns[i, j] = 0.0
            continue
        inverse = 1.0 / u[i * m + i]
        for j in range(q):
            columns[i, j] *= inverse
        for r in range(i + 1, m):
            f = u[i * m + r]
            for j in range(q):
                columns[r, j] -= f * columns[i, j]
    # Modified Gram-Schmidt on the drift columns would spoil F~; the normal matrix of so few columns is enough.
    useful = 0
    for a in range(drifts):
        for b in range(a + 1):
            total = 0.0
            for i in range(m):
                total += columns[i, a] * columns[i, b]
            size = total
            for c in range(b):
                total -= normal[a, c] * normal[b, c]
            if a != b:
                normal[a, b] = total / normal[b, b] if normal[b, b] > 0.0 else 0.0
            elif total > 1e-10 * size:
                normal[a, a] = math.sqrt(total)
                useful += 1
            else:
                normal[a, a] = 0.0
    for j in range(drifts, q):
        for a in range(drifts):
            total = 0.0
            for i in range(m):
                total += columns[i, a] * columns[i, j]
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
    return useful


@compiled
def _station_covariance(
    station: np.ndarray,
    count: int,
    m: int,
    distance: np.ndarray,
    structures: np.ndarray,
    small_scale: float,
    survey_variance: float,
    noise: np.ndarray,
    survey: np.ndarray,
    k: np.ndarray,
    dropped: np.ndarray,
) -> None:
    """Upper triangle of the stations' covariance, padded to m with unit rows."""
    for i in range(m):
        row = i * m
        if i >= count:
            for j in range(i, m):
                k[row + j] = 0.0
            k[row + i] = 1.0
            dropped[m + i] = 0.0
            continue
        add_structures(structures, small_scale, distance, row + i, count - i, k)
        s = station[i]
        if survey_variance > 0.0:
            for j in range(i, count):
                if survey[station[j]] == survey[s]:
                    k[row + j] += survey_variance
        k[row + i] += noise[s]
        for j in range(count, m):
            k[row + j] = 0.0
        dropped[m + i] = k[row + i]


@compiled
def _distances_between(points: np.ndarray, station: np.ndarray, count: int, m: int, out: np.ndarray) -> None:
    """Upper triangle of the distances between the stations of one neighbourhood, rows of length m."""
    d = points.shape[1]
    for i in range(count):
        row = i * m
        for j in range(i, count):
            out[row + j] = 0.0
        for a in range(d):
            x = points[station[i], a]
            for j in range(i, count):
                step = x - points[station[j], a]
                out[row + j] += step * step
        for j in range(i, count):
            out[row + j] = math.sqrt(out[row + j])


@compiled
def _solve_block(
    u: np.ndarray,
    m: int,
    count: int,
    dropped: np.ndarray,
    structures: np.ndarray,
    small_scale: float,
    distance: np.ndarray,
    lanes: int,
    columns: np.ndarray,
    drifts: int,
    w: np.ndarray,
    sums: np.ndarray,
) -> None:
    """Covariances of a block of cells, forward substitution, and the sums that mean and variance are made of.

    `sums` is flat: LANES places for w'w, then LANES for each column's product with w.
    """
    for i in range(count):
        base = i * LANES
        if dropped[i] != 0.0:
            for c in range(lanes):
                w[base + c] = 0.0
        else:
            add_structures(structures, small_scale, distance, base, lanes, w)
    for c in range(count * LANES, m * LANES):
        w[c] = 0.0
    forward(u, m, w, lanes)
    q = columns.shape[1]
    for c in range((q + 1) * LANES):
        sums[c] = 0.0
    for i in range(count):
        base = i * LANES
        for c in range(lanes):
            x = w[base + c]
            sums[c] += x * x
        for j in range(q):
            f = columns[i, j]
            place = (j + 1) * LANES
            for c in range(lanes):
                sums[place + c] += f * w[base + c]


@compiled
def _finish(
    sums: np.ndarray,
    c: int,
    sill: float,
    normal: np.ndarray,
    drifts: int,
    cell_drift: np.ndarray,
    cell_global: np.ndarray,
    global_covariance: np.ndarray,
    value_columns: int,
    mean: np.ndarray,
    scratch: np.ndarray,
) -> float:
    """Mean (into `mean`) and variance of one cell from its sums."""
    variance = sill - sums[c]
    for a in range(drifts):
        scratch[a] = cell_drift[a] - sums[(1 + a) * LANES + c]
    for j in range(value_columns):
        total = sums[(1 + drifts + j) * LANES + c]
        for a in range(drifts):
            total += scratch[a] * normal[drifts + j, a]
        mean[j] = total
    globals_ = cell_global.size
    for g in range(globals_):
        total = cell_global[g] - sums[(1 + drifts + value_columns + g) * LANES + c]
        for a in range(drifts):
            total -= scratch[a] * normal[drifts + value_columns + g, a]
        scratch[drifts + g] = total
    for a in range(drifts):
        if normal[a, a] == 0.0:
            scratch[a] = 0.0
            continue
        total = scratch[a]
        for b in range(a):
            total -= normal[a, b] * scratch[b]
        scratch[a] = total / normal[a, a]
        variance += scratch[a] * scratch[a]
    for g in range(globals_):
        for h in range(globals_):
            variance += scratch[drifts + g] * global_covariance[g, h] * scratch[drifts + h]
    # What is left of zero at a station without noise is rounding of either sign.
    return variance if variance > 4e-15 * sill else 0.0


@compiled
def _prepare(
    station: np.ndarray,
    count: int,
    m: int,
    between: np.ndarray,
    structures: np.ndarray,
    small_scale: float,
    survey_variance: float,
    noise: np.ndarray,
    survey: np.ndarray,
    station_columns: np.ndarray,
    drifts: int,
    u: np.ndarray,
    dropped: np.ndarray,
    columns: np.ndarray,
    normal: np.ndarray,
) -> int:
    """Factor of one neighbourhood for one column, and its transformed value and drift columns."""
    _station_covariance(station, count, m, between, structures, small_scale, survey_variance, noise, survey, u, dropped)
    redundant = factor(u, m, dropped)
    for i in range(m):
        for j in range(columns.shape[1]):
            columns[i, j] = station_columns[station[i], j] if i < count else 0.0
    _transform(u, m, dropped, columns, drifts, normal)
    return redundant


@compiled
def _cell_distances(
    points: np.ndarray,
    station: np.ndarray,
    count: int,
    cells: np.ndarray,
    which: np.ndarray,
    begin: int,
    lanes: int,
    used: int,
    place: np.ndarray,
    out: np.ndarray,
) -> None:
    """Distances of a block of cells to the stations; lanes beyond `used` repeat the last cell."""
    d = points.shape[1]
    for c in range(lanes):
        at = which[begin + min(c, used - 1)]
        for a in range(d):
            place[a * LANES + c] = cells[at, a]
    for i in range(count):
        base = i * LANES
        s = station[i]
        for c in range(lanes):
            out[base + c] = 0.0
        for a in range(d):
            x = points[s, a]
            offset = a * LANES
            for c in range(lanes):
                step = place[offset + c] - x
                out[base + c] += step * step
        for c in range(lanes):
            out[base + c] = math.sqrt(out[base + c])


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
    variances: np.ndarray,
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
    structures : (v, s, 4); structure_count : (v,); variances : (v, 2) small-scale and survey variance
    noise : (v, n); survey : (n,)
    station_columns : (v, n, drifts + values + g)
    global_covariance : (v, g, g)
    mean : (cells, v, values), variance : (cells, v), written
    repairs : (2,) tiles with redundant stations and such stations, added to
    """
    v = structures.shape[0]
    q = station_columns.shape[2]
    g = cell_global.shape[1]
    values = q - drifts - g
    m_most = (capacity + 3) // 4 * 4
    stamp = np.full(points.shape[0], -1, dtype=np.int64)
    station = np.empty(capacity, dtype=np.int64)
    between = np.empty(m_most * m_most)
    u = np.empty((v, m_most * m_most))
    dropped = np.empty((v, 2 * m_most))
    columns = np.empty((v, m_most, q))
    normal = np.zeros((v, q, max(drifts, 1)))
    distance, w = np.empty(m_most * LANES), np.empty(m_most * LANES)
    sums = np.empty((q + 1) * LANES)
    place = np.empty(points.shape[1] * LANES)
    scratch = np.empty(drifts + g + 1)
    for run in range(tile_of_run.size):
        tile = tile_of_run[run]
        count = neighbourhood(tile, points, nodes, splits, order, low, high, own, neighbours, stamp, station)
        m = (count + 3) // 4 * 4
        _distances_between(points, station, count, m, between)
        repaired = 0
        for k in range(v):
            repaired += _prepare(
                station,
                count,
                m,
                between,
                structures[k, : structure_count[k]],
                variances[k, 0],
                variances[k, 1],
                noise[k],
                survey,
                station_columns[k],
                drifts,
                u[k],
                dropped[k],
                columns[k, :m],
                normal[k],
            )
        if repaired > 0:
            repairs[0] += 1
            repairs[1] += repaired
        for begin in range(run_begin[run], run_begin[run + 1], LANES):
            used = min(LANES, run_begin[run + 1] - begin)
            lanes = (used + 7) // 8 * 8
            _cell_distances(points, station, count, cells, which, begin, lanes, used, place, distance)
            for k in range(v):
                nested = structures[k, : structure_count[k]]
                _solve_block(
                    u[k], m, count, dropped[k], nested, variances[k, 0], distance, lanes, columns[k], drifts, w, sums
                )
                sill = variances[k, 0]
                for s in range(nested.shape[0]):
                    sill += nested[s, 1]
                for c in range(used):
                    at = which[begin + c]
                    variance[at, k] = _finish(
                        sums,
                        c,
                        sill,
                        normal[k],
                        drifts,
                        cell_drift[at],
                        cell_global[at],
                        global_covariance[k],
                        values,
                        mean[at, k],
                        scratch,
                    )


@compiled
def factor_stations(
    points: np.ndarray,
    structures: np.ndarray,
    small_scale: float,
    survey_variance: float,
    noise: np.ndarray,
    survey: np.ndarray,
    station_columns: np.ndarray,
    drifts: int,
    u: np.ndarray,
    dropped: np.ndarray,
    columns: np.ndarray,
    normal: np.ndarray,
) -> int:
    """One neighbourhood of all stations: fills `u`, `dropped`, `columns` and `normal`; returns redundant stations."""
    n = points.shape[0]
    m = columns.shape[0]
    station = np.arange(n)
    between = np.empty(m * m)
    _distances_between(points, station, n, m, between)
    return _prepare(
        station, n, m, between, structures, small_scale, survey_variance, noise, survey, station_columns, drifts,
        u, dropped, columns, normal,
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
    u: np.ndarray,
    dropped: np.ndarray,
    columns: np.ndarray,
    drifts: int,
    normal: np.ndarray,
    global_covariance: np.ndarray,
    mean: np.ndarray,
    variance: np.ndarray,
) -> None:
    """Krige cells first..last of one column from all stations, factored by `factor_stations`."""
    n = points.shape[0]
    m, q = columns.shape
    values = q - drifts - cell_global.shape[1]
    station = np.arange(n)
    which = np.arange(first, last)
    distance, w = np.empty(m * LANES), np.empty(m * LANES)
    sums = np.empty((q + 1) * LANES)
    place = np.empty(points.shape[1] * LANES)
    scratch = np.empty(drifts + cell_global.shape[1] + 1)
    sill = small_scale + structures[:, 1].sum()
    for begin in range(0, last - first, LANES):
        used = min(LANES, last - first - begin)
        lanes = (used + 7) // 8 * 8
        _cell_distances(points, station, n, cells, which, begin, lanes, used, place, distance)
        _solve_block(u, m, n, dropped, structures, small_scale, distance, lanes, columns, drifts, w, sums)
        for c in range(used):
            at = first + begin + c
            variance[at] = _finish(
                sums, c, sill, normal, drifts, cell_drift[at], cell_global[at], global_covariance, values, mean[at],
                scratch,
            )  # fmt: skip


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
    variances: np.ndarray,
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
    v, q = structures.shape[0], station_columns.shape[2]
    g = cell_global.shape[1]
    values = q - drifts - g
    n, d = points.shape
    k = min(k, n)
    m_most = (k + 3) // 4 * 4
    stack, offsets = np.empty(DEPTH, dtype=np.int64), np.empty((DEPTH, d + 1))
    station = np.empty(k, dtype=np.int64)
    between, u = np.empty(m_most * m_most), np.empty(m_most * m_most)
    dropped = np.empty(2 * m_most)
    columns = np.empty((m_most, q))
    normal = np.zeros((q, max(drifts, 1)))
    distance, w = np.empty(m_most * LANES), np.empty(m_most * LANES)
    sums = np.empty((q + 1) * LANES)
    place = np.empty(d * LANES)
    scratch = np.empty(drifts + g + 1)
    which = np.empty(1, dtype=np.int64)
    for at in range(first, last):
        count = choose_nearest(points, nodes, splits, order, cells[at], k, radius2, per_sector, stack, offsets, station)
        rung[at] = 0
        if count < at_least:
            rung[at] = 1
            count = choose_nearest(points, nodes, splits, order, cells[at], k, np.inf, 0, stack, offsets, station)
        m = (count + 3) // 4 * 4
        _distances_between(points, station, count, m, between)
        which[0] = at
        _cell_distances(points, station, count, cells, which, 0, 8, 1, place, distance)
        repaired = 0
        for c in range(v):
            nested = structures[c, : structure_count[c]]
            repaired += _prepare(
                station, count, m, between, nested, variances[c, 0], variances[c, 1], noise[c], survey,
                station_columns[c], drifts, u, dropped, columns[:m], normal,
            )  # fmt: skip
            _solve_block(u, m, count, dropped, nested, variances[c, 0], distance, 8, columns, drifts, w, sums)
            sill = variances[c, 0] + nested[:, 1].sum()
            variance[at, c] = _finish(
                sums, 0, sill, normal, drifts, cell_drift[at], cell_global[at], global_covariance[c], values,
                mean[at, c], scratch,
            )  # fmt: skip
        if repaired > 0:
            repairs[0] += 1
            repairs[1] += repaired
