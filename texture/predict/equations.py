"""The kriging equations of one neighbourhood, in the form that needs no backward substitution.

With the covariance matrix of the stations K = U'U, w = U'^-1 k for a cell, and the value and drift columns
transformed once in the same way (z~ = U'^-1 z, F~ = U'^-1 F), the kriging mean and variance are

    mean     = w'z~ + d'b            d = f0 - F~'w,  b = (F~'F~)^-1 F~'z~
    variance = C(0) - w'w + d'(F~'F~)^-1 d

Here is what the stations alone decide: the factor, the transformed columns, the drift's normal matrix. What cells
add is in `texture.predict.block`. Columns stand in the order drift, values, global drift.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from texture.compiling import compiled
from texture.structure.compiled import add_structures
from texture.structure.linear import factor, forward

__all__ = ["Factors", "Models", "factor_neighbourhood", "make_factors", "padded"]


class Models(NamedTuple):
    """The models of some value columns that share their stations, and what is known at those stations.

    Parameters
    ----------
    points : (n, d) in the covariances' metric
    structures : (v, s, 4); structure_count : (v,); small_scale : (v,)
    survey_variance : (v, surveys), 0 where a survey has none
    noise : (v, n); survey : (n,)
    columns : (v, n, drifts + values + g) drift, values, global drift
    drifts, values : numbers of columns of each kind; the rest is global drift
    global_covariance : (v, g, g) of the global drift's coefficients
    """

    points: np.ndarray
    structures: np.ndarray
    structure_count: np.ndarray
    small_scale: np.ndarray
    survey_variance: np.ndarray
    noise: np.ndarray
    survey: np.ndarray
    columns: np.ndarray
    drifts: int
    values: int
    global_covariance: np.ndarray


class Factors(NamedTuple):
    """Factors of one neighbourhood for each model, as room for the largest that may come.

    Parameters
    ----------
    between : (most * most,) distances; u : (v, most * most) factors: for m padded stations the first m * m count
    own : (most,); dropped : (v, most) redundant stations; redundant : (v,) how many
    columns : (v, most, width) transformed columns
    normal : (v, q, drifts) Cholesky factor of F~'F~ in the first rows and each further column's drift coefficients
        below; a drift column that the neighbourhood cannot tell from the earlier ones has 0 on the diagonal there and
        is left out
    """

    between: np.ndarray
    u: np.ndarray
    own: np.ndarray
    dropped: np.ndarray
    redundant: np.ndarray
    columns: np.ndarray
    normal: np.ndarray


@compiled
def padded(count: int) -> int:
    """Stations rounded up to the four that the factor takes at a time."""
    return (count + 3) // 4 * 4


@compiled
def make_factors(models: Models, capacity: int) -> Factors:
    """Room for the factors of neighbourhoods of at most `capacity` stations."""
    v, q = models.columns.shape[0], models.columns.shape[2]
    most = padded(capacity)
    # Columns are rounded up to two vectors of eight: forward substitution on fewer takes longer.
    width = (q + 15) // 16 * 16
    return Factors(
        np.empty(most * most),
        np.empty((v, most * most)),
        np.empty(most),
        np.empty((v, most), dtype=np.bool_),
        np.zeros(v, dtype=np.int64),
        np.empty((v, most, width)),
        np.zeros((v, q, max(models.drifts, 1))),
    )


@compiled
def _station_distances(points: np.ndarray, station: np.ndarray, out: np.ndarray) -> None:
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
def factor_neighbourhood(models: Models, station: np.ndarray, factors: Factors) -> int:
    """Factors and transformed columns of the stations (count,) for every model; returns the redundant stations."""
    m = padded(station.size)
    between = factors.between[: m * m].reshape(m, m)
    _station_distances(models.points, station, between)
    redundant = 0
    for k in range(models.columns.shape[0]):
        u = factors.u[k, : m * m].reshape(m, m)
        factors.redundant[k] = _factor_model(models, k, station, between, u, factors)
        redundant += factors.redundant[k]
    return redundant


@compiled
def _factor_model(
    models: Models, k: int, station: np.ndarray, between: np.ndarray, u: np.ndarray, factors: Factors
) -> int:
    """Factor of one neighbourhood for model k, into `u` (m, m), and its transformed columns."""
    count, m, q = station.size, u.shape[0], models.columns.shape[2]
    own, dropped, columns = factors.own[:m], factors.dropped[k, :m], factors.columns[k, :m]
    structures = models.structures[k, : models.structure_count[k]]
    survey, survey_variance, noise = models.survey, models.survey_variance[k], models.noise[k]
    station_columns = models.columns[k]
    for i in range(m):
        for j in range(columns.shape[1]):
            columns[i, j] = station_columns[station[i], j] if i < count and j < q else 0.0
        if i >= count:
            for j in range(i, m):
                u[i, j] = 0.0
            u[i, i] = 1.0
            own[i] = 0.0
            continue
        add_structures(structures, models.small_scale[k], between[i, i:count], u[i, i:count])
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
    _normal_equations(columns, q, models.drifts, factors.normal[k])
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
