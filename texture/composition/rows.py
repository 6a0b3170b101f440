"""Compiled steps on the coordinates or parts of one row, shared by expected fractions, quantiles, class odds and samples.

Loops over rows run in parallel and give the same bytes whatever the thread count, as no row depends on another.
"""

import math

import numpy as np

from texture.compiling import compiled
from texture.composition.closure import Array, Ints

__all__ = ["add_to_class", "cholesky", "draw", "has_nan", "inverse_row", "order_statistics"]


@compiled
def cholesky(covariance: Array, out: Array) -> bool:
    """Lower factor of a positive semi-definite matrix into `out`; False where it is not one.

    A pivot below 1e-12 of its variance is taken as zero (a coordinate that follows from the others), a
    clearly negative one is refused.
    """
    n = covariance.shape[0]
    for i in range(n):
        for j in range(n):
            out[i, j] = 0.0
    for j in range(n):
        pivot = covariance[j, j]
        for k in range(j):
            pivot -= out[j, k] * out[j, k]
        floor = 1e-12 * abs(covariance[j, j])
        # Rounding in a matrix given to single precision: allow that, not more.
        if pivot < -1e-6 * abs(covariance[j, j]) or covariance[j, j] < 0.0:
            return False
        if pivot <= floor:
            for i in range(j + 1, n):
                rest = covariance[i, j]
                for k in range(j):
                    rest -= out[i, k] * out[j, k]
                if rest * rest > 1e-6 * abs(covariance[i, i]) * (abs(covariance[j, j]) + floor):
                    return False
            continue
        root = math.sqrt(pivot)
        out[j, j] = root
        for i in range(j + 1, n):
            value = covariance[i, j]
            for k in range(j):
                value -= out[i, k] * out[j, k]
            out[i, j] = value / root
    return True


@compiled
def has_nan(row: Array) -> bool:
    """Whether any entry is NaN."""
    return bool(np.isnan(row).any())


@compiled
def inverse_row(y: Array, index: Ints, sign: Array, basis: Array, clipped: bool, shares: Array, out: Array) -> None:
    """Parts of one row of coordinates: closed exp(y @ basis), or, where `basis` is empty, products along paths.

    `clipped` takes coordinates as shares, clipped to [0, 1], rather than as their logits; `shares` (2, d) is scratch.
    """
    parts, depth = index.shape
    if basis.size:
        top = -math.inf
        for p in range(parts):
            out[p] = 0.0
            for i in range(y.size):
                out[p] += y[i] * basis[i, p]
            top = max(top, out[p])
        total = 0.0
        for p in range(parts):
            out[p] = math.exp(out[p] - top)
            total += out[p]
        for p in range(parts):
            out[p] /= total
        return
    for i in range(y.size):
        if clipped:
            shares[0, i] = min(max(y[i], 0.0), 1.0)
            shares[1, i] = 1.0 - shares[0, i]
        else:
            decay = math.exp(-abs(y[i]))
            large = 1.0 / (1.0 + decay)
            small = decay * large
            shares[0, i] = large if y[i] >= 0.0 else small
            shares[1, i] = small if y[i] >= 0.0 else large
    for p in range(parts):
        out[p] = 1.0
        for a in range(depth):
            i = index[p, a]
            if i < 0:
                break
            out[p] *= shares[0, i] if sign[p, a] > 0.0 else shares[1, i]


@compiled
def draw(mean: Array, factor: Array, normals: Array, out: Array) -> None:
    """Coordinates ``mean + factor @ normals`` into `out` (d,); of longer `normals` the first d count."""
    for i in range(mean.size):
        out[i] = mean[i]
        for j in range(i + 1):
            out[i] += factor[i, j] * normals[j]


@compiled
def order_statistics(values: Array, levels: Array, out: Array) -> None:
    """Quantiles of draws, shape (parts, count), into `out` (levels, parts): between ranks, which stand at (k + 1/2) / count."""
    count = values.shape[1]
    for p in range(values.shape[0]):
        ordered = np.sort(values[p])
        for level in range(levels.size):
            place = min(max(levels[level] * count - 0.5, 0.0), count - 1.0)
            below = min(int(place), count - 2)
            share = place - below
            out[level, p] = ordered[below] * (1.0 - share) + ordered[below + 1] * share


@compiled
def add_to_class(x: Array, coefficients: Array, lookup: Ints, tie: float, weight: float, out: Array) -> None:
    """Add `weight` to the texture class of fractions `x` in `out` (n_classes,); a pattern without a class adds nothing."""
    pattern = 0
    for c in range(coefficients.shape[0]):
        total = tie
        for p in range(x.size):
            total += coefficients[c, p] * x[p]
        if total >= 0.0:
            pattern |= 1 << c
    if lookup[pattern] >= 0:
        out[lookup[pattern]] += weight
