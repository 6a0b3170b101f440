"""The logit of a cell's mean share, as a table: for the quantiles of `texture.composition.quantiles`."""

import math

from texture.compiling import compiled
from texture.composition.closure import Array
from texture.composition.logistic_normal import logistic_normal, logistic_normal_slope

__all__ = ["KNOTS", "fill_table", "from_table"]

KNOTS = 17
_LEAST = 1e-100
_LEAST_SLOPE = 0.01
_REACH = 5.0  # standard deviations that the knots cover; straight on beyond


@compiled
def fill_table(mean: float, spread: float, variance: float, table: Array) -> None:
    """Knots of T(b) = logit E[logistic(b + N(0, variance))]: columns b, T, dT/db."""
    reach = max(_REACH * spread, 0.5)
    for k in range(KNOTS):
        b = mean + reach * (2.0 * k / (KNOTS - 1.0) - 1.0)
        small = logistic_normal(-abs(b), variance)
        slope = logistic_normal_slope(b, variance)
        if small > _LEAST:
            value = math.log((1.0 - small) / small)
            slope = min(max(slope / (small * (1.0 - small)), _LEAST_SLOPE), 1.0)
        else:  # no fraction worth the name: only keep rising
            value = -math.log(_LEAST) + _LEAST_SLOPE * abs(b)
            slope = _LEAST_SLOPE
        table[k, 0] = b
        table[k, 1] = value if b >= 0.0 else -value
        table[k, 2] = slope


@compiled
def _find(table: Array, column: int, value: float) -> int:
    low, high = 0, KNOTS - 1
    while high - low > 1:
        middle = (low + high) // 2
        if table[middle, column] <= value:
            low = middle
        else:
            high = middle
    return low


@compiled
def from_table(value: float, sign: float, table: Array, backwards: bool) -> tuple[float, float]:
    """T(value), or its inverse, and the slope there; `sign` -1 for a coordinate turned round (T is odd)."""
    if table.shape[0] == 0:
        return value, 1.0
    x = sign * value
    source = 1 if backwards else 0
    target = 1 - source
    k = _find(table, source, x)
    s0, s1 = table[k, 2], table[k + 1, 2]
    if backwards:
        s0, s1 = 1.0 / s0, 1.0 / s1
    x0, x1 = table[k, source], table[k + 1, source]
    y0, y1 = table[k, target], table[k + 1, target]
    if x <= x0:
        return sign * (y0 + s0 * (x - x0)), s0
    if x >= x1:
        return sign * (y1 + s1 * (x - x1)), s1
    # Cubic Hermite between knots, with slopes that keep it rising (Fritsch & Carlson 1980).
    h = x1 - x0
    steepest = 3.0 * (y1 - y0) / h
    s0, s1 = min(s0, steepest), min(s1, steepest)
    r = (x - x0) / h
    bend = 3.0 * (y1 - y0) / h - 2.0 * s0 - s1
    twist = s0 + s1 - 2.0 * (y1 - y0) / h
    y = y0 + h * r * (s0 + r * (bend + r * twist))
    return sign * y, s0 + r * (2.0 * bend + 3.0 * r * twist)
