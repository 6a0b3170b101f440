"""The correlation formulas, compiled, and covariance matrices made with them.

Everything here takes plain arrays. A covariance arrives as `structures`, a float64 array with one row per nested
structure: model code, sill, 1 / scale, smoothness (see `texture.structure.covariance.Covariance.packed`).
Loops run over a contiguous row of distances so that the compiler can use vector instructions; no fast-math, so a
value does not depend on where in the row it stands.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from llvmlite import ir  # type: ignore[import-untyped]  # ships no annotations
from numba import types
from numba.extending import intrinsic

from texture.compiling import compiled
from texture.structure.models import (
    CUBIC,
    EXPONENTIAL,
    GAUSSIAN,
    MATERN_3_2,
    MATERN_5_2,
    SPHERICAL,
)

__all__ = ["COINCIDENT_M", "add_structures", "correlation", "covariance_matrix", "distance_matrix"]

# Two points closer than a micrometre are the same point: far above the rounding of projected coordinates (1e-9 m),
# far below any position fix.
COINCIDENT_M = 1e-6

_LOG2_E = 1.4426950408889634
_LN2_HIGH = 6.93147180369123816490e-01
_LN2_LOW = 1.90821492927058770002e-10
_ROUND = 6755399441055744.0  # 1.5 * 2**52: adding it rounds to an integer that then stands in the low bits


@intrinsic
def _bits_of(typingctx: Any, value: Any) -> Any:
    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return builder.bitcast(args[0], ir.IntType(64))

    return types.int64(types.float64), codegen


@intrinsic
def _float_of(typingctx: Any, value: Any) -> Any:
    def codegen(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        return builder.bitcast(args[0], ir.DoubleType())

    return types.float64(types.int64), codegen


@compiled
def exp_of_negative(x: float) -> float:
    """exp(x) for x <= 0 without a call, so that loops over it become vector code; within 1 ulp or 2.

    Cody & Waite's reduction to [-ln2/2, ln2/2], then the Taylor series to the 13th power (remainder 4e-18).
    """
    x = x if x > -708.0 else -708.0
    shifted = x * _LOG2_E + _ROUND
    k = shifted - _ROUND
    r = (x - k * _LN2_HIGH) - k * _LN2_LOW
    p = 1.0 / 6227020800.0
    p = p * r + 1.0 / 479001600.0
    p = p * r + 1.0 / 39916800.0
    p = p * r + 1.0 / 3628800.0
    p = p * r + 1.0 / 362880.0
    p = p * r + 1.0 / 40320.0
    p = p * r + 1.0 / 5040.0
    p = p * r + 1.0 / 720.0
    p = p * r + 1.0 / 120.0
    p = p * r + 1.0 / 24.0
    p = p * r + 1.0 / 6.0
    p = p * r + 0.5
    p = p * r + 1.0
    p = p * r + 1.0
    return p * _float_of((_bits_of(shifted) + 1023) << 52)  # type: ignore[call-arg]  # numba adds the typing context


@compiled
def _general_matern(x: float, nu: float) -> float:
    """Matérn correlation by the trapezoidal rule on K_nu(x) = int exp(-x cosh t) cosh(nu t) dt.

    The integrand is analytic for |Im t| < pi/2, so a step of 0.2 leaves about exp(-pi**2 / 0.2) = 4e-22.
    """
    if x < 1e-10:
        return 1.0
    log_factor = (1.0 - nu) * math.log(2.0) - math.lgamma(nu) + nu * math.log(x)
    total = 0.5 * math.exp(log_factor - x)
    t = 0.2
    while True:
        exponent = log_factor - x * math.cosh(t) + nu * t
        term = 0.5 * math.exp(exponent) * (1.0 + math.exp(-2.0 * nu * t))
        total += term
        # The terms rise to one maximum and then fall ever faster.
        if term < 1e-18 * total and x * math.sinh(t) > nu:
            break
        t += 0.2
        if t > 700.0:
            break
    return min(1.0, 0.2 * total)


@compiled
def add_structures(structures: np.ndarray, small_scale: float, distance: np.ndarray, out: np.ndarray) -> None:
    """Write the covariance at each of `distance` (contiguous, 1-D) to the same place of `out`.

    Give it slices rather than a start and a stop: loops from 0 are what the compiler makes vector code of.
    """
    n = out.size
    for c in range(n):
        out[c] = small_scale if distance[c] <= COINCIDENT_M else 0.0
    for s in range(structures.shape[0]):
        code = int(structures[s, 0])
        sill = structures[s, 1]
        inverse = structures[s, 2]
        nu = structures[s, 3]
        if code == EXPONENTIAL:
            for c in range(n):
                out[c] += sill * exp_of_negative(-(distance[c] * inverse))
        elif code == MATERN_3_2:
            for c in range(n):
                x = distance[c] * inverse
                out[c] += sill * ((1.0 + x) * exp_of_negative(-x))
        elif code == MATERN_5_2:
            for c in range(n):
                x = distance[c] * inverse
                out[c] += sill * ((1.0 + x + x * x * (1.0 / 3.0)) * exp_of_negative(-x))
        elif code == GAUSSIAN:
            for c in range(n):
                x = distance[c] * inverse
                out[c] += sill * exp_of_negative(-(x * x))
        elif code == SPHERICAL:
            for c in range(n):
                x = min(distance[c] * inverse, 1.0)
                out[c] += sill * (1.0 - x * (1.5 - 0.5 * (x * x)))
        elif code == CUBIC:
            for c in range(n):
                x = min(distance[c] * inverse, 1.0)
                q = x * x
                out[c] += sill * (1.0 - q * (7.0 - x * (8.75 - q * (3.5 - 0.75 * q))))
        else:
            for c in range(n):
                out[c] += sill * _general_matern(distance[c] * inverse, nu)


@compiled
def correlation(code: int, smoothness: float, x: np.ndarray) -> np.ndarray:
    """Correlation at scaled distances `x` (1-D), for one model code."""
    structures = np.empty((1, 4))
    structures[0, 0] = code
    structures[0, 1] = 1.0
    structures[0, 2] = 1.0
    structures[0, 3] = smoothness
    out = np.empty(x.size)
    add_structures(structures, 0.0, x, out)
    return out


@compiled
def trace_products(  # type: ignore[no-untyped-def]
    inverse, left, right, projected, first, second, third
) -> tuple[float, float, float, float]:
    """Traces of M with three symmetric matrices and with unity, in one pass.

    M = `inverse` - `left` `right`' - `projected` `projected`'. Of `inverse` (n, n) only the lower triangle is read;
    `left` and `right` are (n, p). Matrices of shape (0, 0) count as zero.
    """
    n, p = left.shape
    sums = np.zeros(4)
    for i in range(n):
        for j in range(i + 1):
            m = inverse[i, j] - projected[i] * projected[j]
            for a in range(p):
                m -= left[i, a] * right[j, a]
            if i == j:
                sums[3] += m
                m *= 0.5
            if first.size:
                sums[0] += m * first[i, j]
            if second.size:
                sums[1] += m * second[i, j]
            if third.size:
                sums[2] += m * third[i, j]
    return 2.0 * sums[0], 2.0 * sums[1], 2.0 * sums[2], sums[3]


@compiled
def distance_matrix(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Distances between rows of a (n, d) and rows of b (m, d), by differences (no cancellation), shape (n, m)."""
    n, m = a.shape[0], b.shape[0]
    columns = np.ascontiguousarray(b.T)
    out = np.zeros((n, m))
    for i in range(n):
        row = out[i]
        for d in range(a.shape[1]):
            x = a[i, d]
            column = columns[d]
            for j in range(m):
                step = x - column[j]
                row[j] += step * step
        for j in range(m):
            row[j] = math.sqrt(row[j])
    return out


@compiled
def covariance_matrix(structures: np.ndarray, small_scale: float, distance: np.ndarray) -> np.ndarray:
    """Covariances for a C-ordered array of distances (n, m)."""
    out = np.empty(distance.shape)
    for i in range(distance.shape[0]):
        add_structures(structures, small_scale, distance[i], out[i])
    return out
