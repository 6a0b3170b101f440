"""Whether the stated uncertainty is as large as held-out errors are, and by what factor it is not.

One factor for each column multiplies its whole covariance: sills, small-scale variation, survey offsets and every noise
alike. Kriging weights depend on ratios alone, so predictions stay where they are in the column, and everything that follows from
the variance (expected fractions, quantiles, odds, members) follows the factor.

The factor is the one of highest likelihood given the held-out errors. For values that are known exactly that is the mean
squared standardised error. What was measured below a limit enters by the probability of lying below it.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["LEAST_ERRORS", "calibration_factor", "calibration_factors", "out_of_fold_factors"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

LEAST_ERRORS = 20  # fewer held-out errors leave a factor that is off by a third, so none is applied
SMALLEST, LARGEST = 0.1, 10.0  # beyond a factor of ten it is the model that is wrong, not its scale
DIGITS = 4  # a factor is known to a few percent; rounded, it is the same everywhere


def calibration_factor(mean: Floats, variance: Floats, low: Floats, high: Floats) -> float:
    """Factor on the variance that makes held-out values of one column most likely; 1 with too few of them.

    Parameters
    ----------
    mean, variance : float arrays, shape (n,)
        Held-out predictions of samples, noise included.
    low, high : float arrays, shape (n,)
        Bounds of the values; equal where they are known exactly, infinite where open, NaN where unknown.

    Examples
    --------
    >>> errors = np.array([-2.0, 2.0] * 10)
    >>> calibration_factor(np.zeros(20), np.ones(20), errors, errors)
    4.0
    """
    from scipy.optimize import minimize_scalar
    from scipy.special import log_ndtr

    known = np.isfinite(mean) & (variance > 0.0) & ~np.isnan(low) & ~np.isnan(high)
    exact = known & (low == high)
    if int(exact.sum()) < LEAST_ERRORS:
        return 1.0
    deviation = np.sqrt(variance)
    square = float((((low - mean) / np.where(deviation > 0, deviation, 1.0))[exact] ** 2).sum())
    bounded = known & ~exact
    below, above = ((b[bounded] - mean[bounded]) / deviation[bounded] for b in (low, high))
    # From above when both bounds lie above: differences of log-probabilities keep their digits in the lower tail.
    flip = below > 0.0
    below, above = np.where(flip, -above, below), np.where(flip, -below, above)

    def loss(log_factor: float) -> float:
        scale = np.exp(-0.5 * log_factor)
        top, bottom = log_ndtr(above * scale), log_ndtr(below * scale)
        with np.errstate(divide="ignore"):
            inside = top + np.log1p(-np.exp(np.minimum(bottom - top, -1e-15)))
        return float(0.5 * (exact.sum() * log_factor + square * scale**2) - inside.sum())

    if not bounded.any():
        factor = square / exact.sum()
    else:
        limits = (np.log(SMALLEST), np.log(LARGEST))
        factor = float(np.exp(minimize_scalar(loss, bounds=limits, method="bounded", options={"xatol": 1e-6}).x))
    return float(np.round(np.clip(factor, SMALLEST, LARGEST), DIGITS))


def calibration_factors(mean: Floats, variance: Floats, low: Floats, high: Floats) -> Floats:
    """`calibration_factor` of each column; arrays of shape (n, k), result (k,)."""
    columns = range(mean.shape[1])
    return np.array([calibration_factor(mean[:, j], variance[:, j], low[:, j], high[:, j]) for j in columns])


def out_of_fold_factors(mean: Floats, variance: Floats, low: Floats, high: Floats, labels: Ints) -> Floats:
    """Factors of each station learned from the stations of all other folds, shape (n, k)."""
    factors = np.ones(mean.shape)
    for fold in np.unique(labels):
        own = labels == fold
        factors[own] = calibration_factors(mean[~own], variance[~own], low[~own], high[~own])
    return factors
