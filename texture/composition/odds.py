"""The compiled loop behind `texture.composition.classes.class_odds`."""

import math

import numpy as np
from numba import prange

from texture.compiling import compiled
from texture.composition.rows import add_to_class, cholesky, draw, has_nan, inverse_row

__all__ = ["odds_kernel"]


@compiled(parallel=True)
def odds_kernel(  # type: ignore[no-untyped-def]
    mean, covariance, index, sign, basis, clipped, coefficients, lookup, draws, tie, out, status
):
    """Share of draws in each class, row by row, into `out` (n, n_classes); NaN rows where moments are unknown."""
    n, d = mean.shape
    parts = index.shape[0]
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]):
            out[row] = math.nan
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            continue
        y = np.empty(d)
        x = np.empty(parts)
        shares = np.empty((2, d))
        weight = 1.0 / draws.shape[0]
        for k in range(draws.shape[0]):
            draw(mean[row], factor, draws[k], y)
            inverse_row(y, index, sign, basis, clipped, shares, x)
            add_to_class(x, coefficients, lookup, tie, weight, out[row])
