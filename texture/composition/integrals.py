"""Compiled integrals of fractions over normal coordinates, for `texture.composition.expected`.

Nodes are those of the trapezoidal rule in standardised coordinates, or draws where these are given; a row with a NaN
becomes a NaN row, and `status` marks rows whose matrix is no covariance.
"""

import math

import numpy as np
from numba import prange

from texture.compiling import compiled
from texture.composition.closure import Array
from texture.composition.logistic_normal import logistic, logistic_normal, mixture_scales, smooth_logistic
from texture.composition.rows import cholesky, has_nan

__all__ = ["independent_kernel", "linear_kernel", "path_kernel"]

_Z_MAX = 5.0  # the normal tails left out weigh 6e-7


@compiled(parallel=True)
def independent_kernel(mean, variance, index, sign, out):  # type: ignore[no-untyped-def]
    """Expected products of logistics along each part's path, coordinates uncorrelated."""
    n, d = mean.shape
    parts, depth = index.shape
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(variance[row]):
            out[row] = math.nan
            continue
        small = np.empty(d)
        for i in range(d):  # of the smaller side, so that neither loses digits
            small[i] = logistic_normal(-abs(mean[row, i]), variance[row, i])
        for part in range(parts):
            value = 1.0
            for level in range(depth):
                i = index[part, level]
                if i < 0:
                    break
                towards = sign[part, level] * mean[row, i]
                value *= small[i] if towards < 0.0 else 1.0 - small[i]
            out[row, part] = value


@compiled
def _step(spread: float) -> float:
    """Trapezoidal step in standardised units: the logistic's poles stand pi / spread off the axis."""
    return min(0.9, 1.5 / spread) if spread > 0.0 else 0.9


@compiled(parallel=True)
def path_kernel(mean, covariance, index, sign, draws, out, status):  # type: ignore[no-untyped-def]
    """Expected products of logistics along each part's path, coordinates correlated."""
    n = mean.shape[0]
    parts, depth = index.shape
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]):
            out[row] = math.nan
            continue
        factor = np.zeros((depth, depth))
        sub = np.zeros((depth, depth))
        m = np.zeros(depth)
        scales = np.empty(5)
        twin = False  # whether the last path's integral also gave this part
        other = 0.0
        for part in range(parts):
            if twin:
                out[row, part] = other
                twin = False
                continue
            length = 0
            while length < depth and index[part, length] >= 0:
                length += 1
            for a in range(length):
                i = index[part, a]
                m[a] = sign[part, a] * mean[row, i]
                for b in range(length):
                    j = index[part, b]
                    sub[a, b] = sign[part, a] * sign[part, b] * covariance[row, i, j]
            if length == 1:
                tiny = logistic_normal(-abs(m[0]), sub[0, 0])
                out[row, part] = tiny if m[0] < 0.0 else 1.0 - tiny
                continue
            if not cholesky(sub[:length, :length], factor[:length, :length]):
                status[row] = True
                break
            last = length - 1
            mixture_scales(factor[last, last] ** 2, scales)
            # Two leaves of one split share everything but the sign of the last factor.
            twin = part + 1 < parts
            for a in range(depth):
                same = twin and index[part + 1, a] == index[part, a]
                if same and a < last:
                    same = sign[part + 1, a] == sign[part, a]
                twin = same
            value, other = _path_integral(m[:length], factor[:length, :length], scales, draws)
            out[row, part] = value


@compiled
def _path_integral(mean: Array, factor: Array, scales: Array, draws: Array) -> tuple[float, float]:
    """E[prod of logistics along a path], and the same with the last factor's complement."""
    last = mean.size - 1
    value = 0.0
    other = 0.0
    total = 0.0
    if last == 1:
        h = _step(max(factor[0, 0], abs(factor[1, 0])))
        count = math.ceil(_Z_MAX / h)
        for k in range(-count, count + 1):
            z = k * h
            w = math.exp(-0.5 * z * z)
            total += w
            w *= logistic(mean[0] + factor[0, 0] * z)
            inner = smooth_logistic(mean[1] + factor[1, 0] * z, scales)
            value += w * inner
            other += w * (1.0 - inner)
        return value / total, other / total
    if last == 2:
        h0 = _step(max(factor[0, 0], abs(factor[1, 0]), abs(factor[2, 0])))
        h1 = _step(max(factor[1, 1], abs(factor[2, 1])))
        count0 = math.ceil(_Z_MAX / h0)
        count1 = math.ceil(_Z_MAX / h1)
        for k in range(-count0, count0 + 1):
            z0 = k * h0
            w0 = math.exp(-0.5 * z0 * z0)
            p0 = logistic(mean[0] + factor[0, 0] * z0)
            for j in range(-count1, count1 + 1):
                z1 = j * h1
                w = w0 * math.exp(-0.5 * z1 * z1)
                total += w
                w *= p0 * logistic(mean[1] + factor[1, 0] * z0 + factor[1, 1] * z1)
                inner = smooth_logistic(mean[2] + factor[2, 0] * z0 + factor[2, 1] * z1, scales)
                value += w * inner
                other += w * (1.0 - inner)
        return value / total, other / total
    for k in range(draws.shape[0]):
        w = 1.0
        for a in range(last):
            y = mean[a]
            for b in range(a + 1):
                y += factor[a, b] * draws[k, b]
            w *= logistic(y)
        y = mean[last]
        for b in range(last):
            y += factor[last, b] * draws[k, b]
        inner = smooth_logistic(y, scales)
        value += w * inner
        other += w * (1.0 - inner)
    return value / draws.shape[0], other / draws.shape[0]


@compiled(parallel=True)
def linear_kernel(mean, covariance, basis, draws, out, status):  # type: ignore[no-untyped-def]
    """Expected closed exp(y @ basis): product trapezoidal rule to three coordinates, draws beyond."""
    n, d = mean.shape
    parts = basis.shape[1]
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]):
            out[row] = math.nan
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            out[row] = math.nan
            continue
        # Logs of the parts along each standard coordinate, and the node count that their spread asks for.
        slope = np.zeros((d, parts))
        level = np.zeros(parts)
        for j in range(parts):
            for i in range(d):
                level[j] += mean[row, i] * basis[i, j]
                for k in range(d):
                    slope[k, j] += factor[i, k] * basis[i, j]
        counts = np.zeros(d, dtype=np.int64)
        steps = np.ones(d)
        nodes = 1
        if draws.shape[0] == 0:
            for k in range(d):
                spread = slope[k].max() - slope[k].min()
                if spread > 0.0:
                    steps[k] = _step(spread)
                    counts[k] = math.ceil(_Z_MAX / steps[k])
                nodes *= 2 * counts[k] + 1
        else:
            nodes = draws.shape[0]
        sums = np.zeros(parts)
        logs = np.empty(parts)
        total = 0.0
        for node in range(nodes):
            rest = node
            square = 0.0
            for j in range(parts):
                logs[j] = level[j]
            for k in range(d):
                if draws.shape[0] == 0:
                    width = 2 * counts[k] + 1
                    z = (rest % width - counts[k]) * steps[k]
                    rest //= width
                    square += z * z
                else:
                    z = draws[node, k]
                for j in range(parts):
                    logs[j] += slope[k, j] * z
            w = math.exp(-0.5 * square)
            total += w
            top = logs.max()
            s = 0.0
            for j in range(parts):
                logs[j] = math.exp(logs[j] - top)
                s += logs[j]
            for j in range(parts):
                sums[j] += w * logs[j] / s
        for j in range(parts):
            out[row, j] = sums[j] / total
