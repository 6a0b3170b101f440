"""Compiled loops of `texture.composition.presence_draws`: over places, and over draws of the coordinates at each.

The last column of the draws is the hidden normal's own.
"""

import math

import numpy as np
from numba import prange

from texture.compiling import compiled
from texture.composition.hidden import along, loadings, take_away
from texture.composition.logistic_normal import mixture_scales, normal_cdf, smooth_logistic
from texture.composition.rows import add_to_class, cholesky, draw, has_nan, inverse_row, order_statistics

__all__ = ["expected_kernel", "odds_kernel", "quantile_kernel", "sample_kernel"]


@compiled(parallel=True)
def expected_kernel(  # type: ignore[no-untyped-def]
    mean, covariance, probability, correlation, index, sign, column, sibling, draws, out, status
):
    """Mean fractions into `out` (n, parts): the hidden normal's own draw is integrated out."""
    n, d = mean.shape
    parts = index.shape[0]
    basis = np.zeros((0, 0))
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]) or math.isnan(probability[row]):
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            continue
        load, y, x, shares = np.zeros(d), np.empty(d), np.empty(parts), np.empty((2, d))
        threshold, own = loadings(probability[row], correlation[row], covariance[row], factor, load)
        total = np.zeros(parts)
        for k in range(draws.shape[0]):
            draw(mean[row], factor, draws[k], y)
            inverse_row(y, index, sign, basis, False, shares, x)
            take_away(x, column, sibling, normal_cdf(along(threshold, load, draws[k]) / own))
            total += x
        out[row] = total / draws.shape[0]


@compiled(parallel=True)
def quantile_kernel(  # type: ignore[no-untyped-def]
    mean, covariance, inside, probability, correlation, tie, index, sign, column, sibling, draws, q, out, status
):
    """Quantiles of cell means into `out` (q, n, parts); `tie` is the correlation of presence between points of a cell."""
    n, d = mean.shape
    parts = index.shape[0]
    count = draws.shape[0]
    basis = np.zeros((0, 0))
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]) or math.isnan(probability[row]):
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            continue
        load, y, x, shares = np.zeros(d), np.empty(d), np.empty(parts), np.empty((2, d))
        scales = np.empty((d, 5))
        for i in range(d):
            mixture_scales(inside[row, i], scales[i])
        threshold, own = loadings(probability[row], correlation[row], covariance[row], factor, load)
        values = np.empty((parts, count))
        for k in range(count):
            hidden = along(own * draws[k, d], load, draws[k])
            draw(mean[row], factor, draws[k], y)
            for i in range(d):
                if inside[row, i] > 0.0:
                    small = min(max(smooth_logistic(-abs(y[i]), scales[i]), 1e-300), 0.5)
                    y[i] = math.copysign(math.log((1.0 - small) / small), y[i])
            inverse_row(y, index, sign, basis, False, shares, x)
            if tie[row] >= 1.0 - 1e-9:
                there = 1.0 if threshold + hidden > 0.0 else 0.0
            else:
                there = normal_cdf((threshold + math.sqrt(tie[row]) * hidden) / math.sqrt(1.0 - tie[row]))
            take_away(x, column, sibling, there)
            for p in range(parts):
                values[p, k] = x[p]
        order_statistics(values, q, out[:, row])


@compiled(parallel=True)
def odds_kernel(  # type: ignore[no-untyped-def]
    mean,
    covariance,
    probability,
    correlation,
    index,
    sign,
    column,
    sibling,
    draws,
    coefficients,
    lookup,
    tie,
    out,
    status,
):
    """Share of draws in each class into `out` (n, n_classes); NaN rows where moments are unknown."""
    n, d = mean.shape
    parts = index.shape[0]
    basis = np.zeros((0, 0))
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]) or math.isnan(probability[row]):
            out[row] = math.nan
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            continue
        load, y, x, shares = np.zeros(d), np.empty(d), np.empty(parts), np.empty((2, d))
        threshold, own = loadings(probability[row], correlation[row], covariance[row], factor, load)
        weight = 1.0 / draws.shape[0]
        for k in range(draws.shape[0]):
            hidden = along(threshold + own * draws[k, d], load, draws[k])
            draw(mean[row], factor, draws[k], y)
            inverse_row(y, index, sign, basis, False, shares, x)
            take_away(x, column, sibling, 1.0 if hidden > 0.0 else 0.0)
            add_to_class(x, coefficients, lookup, tie, weight, out[row])


@compiled(parallel=True)
def sample_kernel(  # type: ignore[no-untyped-def]
    mean, covariance, probability, correlation, index, sign, column, sibling, draws, out, status
):
    """Fractions of single samples into `out` (n, draws, parts)."""
    n, d = mean.shape
    basis = np.zeros((0, 0))
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]) or math.isnan(probability[row]):
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            continue
        load, y, shares = np.zeros(d), np.empty(d), np.empty((2, d))
        threshold, own = loadings(probability[row], correlation[row], covariance[row], factor, load)
        for k in range(draws.shape[0]):
            hidden = along(threshold + own * draws[k, d], load, draws[k])
            draw(mean[row], factor, draws[k], y)
            inverse_row(y, index, sign, basis, False, shares, out[row, k])
            take_away(out[row, k], column, sibling, 1.0 if hidden > 0.0 else 0.0)
