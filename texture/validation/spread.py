"""An uncertainty for methods that have none: that of their own held-out errors in the other folds."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["out_of_fold_spread", "residual_spread"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
LEAST_PAIRS = 20  # fewer held-out errors of both columns tell nothing of their correlation


def residual_spread(errors: Floats) -> tuple[Floats, Floats]:
    """Mean square of held-out errors of each column (k,), and their correlation (k, k).

    A column without errors has variance 0; NaN are left out. Columns of which fewer than twenty errors are known together are
    taken as uncorrelated.
    """
    known = np.isfinite(errors)
    count = known.sum(axis=0)
    filled = np.where(known, errors, 0.0)
    variance = (filled**2).sum(axis=0) / np.maximum(count, 1)
    together = known.T.astype(np.float64) @ known.astype(np.float64)
    squares = np.sqrt((filled**2).T @ known.astype(np.float64))  # of each column over the rows that know both
    scale = squares * squares.T
    correlation = np.divide(filled.T @ filled, scale, out=np.zeros_like(scale), where=scale > 0.0)
    correlation[together < LEAST_PAIRS] = 0.0
    np.fill_diagonal(correlation, 1.0)
    return variance, _nearest_valid(correlation)


def out_of_fold_spread(errors: Floats, labels: Ints) -> tuple[Floats, Floats]:
    """For each station the spread of the errors in all other folds: variances (n, k), correlations (n, k, k)."""
    n, k = errors.shape
    variance, correlation = np.empty((n, k)), np.empty((n, k, k))
    for fold in np.unique(labels):
        own = labels == fold
        variance[own], correlation[own] = residual_spread(errors[~own])
    return variance, correlation


def _nearest_valid(correlation: Floats) -> Floats:
    """Pairs known from different rows may not fit together: clip negative eigenvalues away."""
    values, vectors = np.linalg.eigh(correlation)
    if values[0] >= 0.0:
        return correlation
    fixed = (vectors * np.maximum(values, 0.0)) @ vectors.T
    scale = np.sqrt(np.diag(fixed))
    return np.asarray(fixed / scale / scale[:, None])
