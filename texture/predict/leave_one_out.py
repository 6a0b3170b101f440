"""Every station left out of the tiles that serve it, compiled: one factor per tile and model, all its stations at once.

With K = U'U and w = U'^-1 e for the unit vector e of a station, w'w is that station's element of inv(K) and w'z~ its
element of inv(K) z. The drift takes from them what it takes from a cell's variance and mean (see
`texture.predict.equations`); what remains are the elements of the bordered inverse B that leaving the one station out
needs: its error is (B z)_i / B_ii, with variance 1 / B_ii (Dubrule 1983).
"""

from __future__ import annotations

import math

import numpy as np

from texture.compiling import compiled
from texture.predict.block import block_size, substitute
from texture.predict.cuts import Boxes
from texture.predict.equations import Models, factor_neighbourhood, make_factors, padded
from texture.predict.neighbours import Tree
from texture.predict.union import neighbourhood

__all__ = ["leave_out_of_runs"]

# Stations of one tile that are left out of one factor; a tile with more of them makes its factor again for the rest.
AT_ONCE = 64


@compiled
def leave_out_of_runs(
    models: Models,
    tree: Tree,
    boxes: Boxes,
    neighbours: int,
    capacity: int,
    tile_of_run: np.ndarray,
    run_begin: np.ndarray,
    which: np.ndarray,
    untold: float,
    value: np.ndarray,
    spread: np.ndarray,
    alone: np.ndarray,
) -> None:
    """Departure of each left-out sample as one tile predicts it, and the variance of its error.

    Parameters
    ----------
    models : their noise raised so far that the factor finds no station redundant
    capacity : most stations of a neighbourhood
    tile_of_run : (r,) tile of each run; run_begin : (r + 1,) where its stations begin in `which`
    which : (p,) stations
    untold : part of inv(K) below which what the drift leaves of a station is nothing
    value, spread : (p, v), written in the order of `which`; NaN where the others cannot tell the drift
    alone : (p, v), written: by how much the error grows when the sample's whole survey is raised by one; 1 where no
        other sample of that survey has weight
    """
    n, v, q = tree.points.shape[0], models.columns.shape[0], models.columns.shape[2]
    most = min(n, capacity + AT_ONCE)
    stamp, place = np.full(n, -1, dtype=np.int64), np.zeros(n, dtype=np.int64)
    station, factors = np.empty(most, dtype=np.int64), make_factors(models, most)
    room, room_of_sums = np.empty((2, padded(most) * AT_ONCE)), np.empty((2, (q + 1) * AT_ONCE))
    for run in range(tile_of_run.size):
        own = neighbourhood(tile_of_run[run], tree, boxes, neighbours, stamp, station[:capacity])
        for i in range(own):
            place[station[i]] = i
        for begin in range(run_begin[run], run_begin[run + 1], AT_ONCE):
            left_out = which[begin : min(begin + AT_ONCE, run_begin[run + 1])]
            count = own
            for s in left_out:
                # Of many stations close together a neighbourhood has some: the others join it in their turn.
                if place[s] >= own or station[place[s]] != s:
                    place[s] = count
                    station[count] = s
                    count += 1
            factor_neighbourhood(models, station[:count], factors)
            m, size = padded(count), block_size(left_out.size)
            w, sums = room[0, : m * size].reshape(m, size), room_of_sums[0, : (q + 1) * size].reshape(q + 1, size)
            same, raised = room[1, : m * size].reshape(m, size), room_of_sums[1, : (q + 1) * size].reshape(q + 1, size)
            for k in range(v):
                w[:] = 0.0
                for c in range(left_out.size):
                    w[place[left_out[c]], c] = 1.0
                u, surveys = factors.u[k, : m * m].reshape(m, m), models.survey_variance[k].any()
                substitute(u, factors.columns[k], q, w, sums)
                if surveys:
                    same[:] = 0.0
                    for c in range(left_out.size):
                        for i in range(count):
                            if models.survey[station[i]] == models.survey[left_out[c]]:
                                same[i, c] = 1.0
                    substitute(u, factors.columns[k], q, same, raised)
                for c in range(left_out.size):
                    departure = models.columns[k, left_out[c], models.drifts]
                    error, variance = _error(sums[:, c], factors.normal[k], models.drifts, untold)
                    value[begin + c, k], spread[begin + c, k] = departure - error, variance
                    if surveys:
                        product = _column_product(w, same, c)
                        drift = _drift_product(sums[:, c], raised[:, c], factors.normal[k], models.drifts)
                        alone[begin + c, k] = variance * (product - drift)


@compiled
def _error(sums: np.ndarray, normal: np.ndarray, drifts: int, untold: float) -> tuple[float, float]:
    """Error of one left-out sample and its variance, from its sums (1 + q,)."""
    inverse, weighted = sums[0], sums[1 + drifts]
    for a in range(drifts):
        weighted -= sums[1 + a] * normal[drifts, a]
    remains = inverse - _drift_product(sums, sums, normal, drifts)
    if not remains > untold * inverse:
        return math.nan, math.nan
    return weighted / remains, 1.0 / remains


@compiled
def _drift_product(one: np.ndarray, other: np.ndarray, normal: np.ndarray, drifts: int) -> float:
    """What the drift takes from the product of two right-hand sides, from their sums (1 + q,)."""
    rest, beside = np.empty(drifts), np.empty(drifts)
    total = 0.0
    for a in range(drifts):
        rest[a], beside[a] = one[1 + a], other[1 + a]
        for b in range(a):
            rest[a] -= normal[a, b] * rest[b]
            beside[a] -= normal[a, b] * beside[b]
        inverse = 1.0 / normal[a, a] if normal[a, a] > 0.0 else 0.0
        rest[a] *= inverse
        beside[a] *= inverse
        total += rest[a] * beside[a]
    return total


@compiled
def _column_product(a: np.ndarray, b: np.ndarray, c: int) -> float:
    total = 0.0
    for i in range(a.shape[0]):
        total += a[i, c] * b[i, c]
    return total
