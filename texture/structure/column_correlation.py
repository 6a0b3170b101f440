"""Correlation between columns: of their residuals whitened by each column's own covariance."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from texture.structure.covariance import Covariance

__all__ = ["column_correlation", "six_digits"]

Array = NDArray[np.float64]

# Stations known in both columns that enter one correlation.
MOST_DENSE = 500


def six_digits(value: float) -> float:
    """A number to the six significant digits that fits are rounded to."""
    return float(f"{value:.6g}")


def column_correlation(
    points: Array, values: Array, noise: Array, drift: Array, labels: Any, fitted: list[Covariance], seed: int
) -> Array:
    """Correlation between columns of residuals whitened by each column's own covariance.

    Where all columns follow one correlation model this is the maximum likelihood estimate of the correlation of an
    intrinsic coregionalisation (Wackernagel 2003); elsewhere it is the correlation of the kriging errors. Only
    stations that know both columns enter, a seeded 500 of them where there are more.
    """
    count = values.shape[1]
    result = np.eye(count)
    rng = np.random.default_rng(seed)
    for a in range(count):
        for b in range(a):
            both = np.flatnonzero(np.isfinite(values[:, a]) & np.isfinite(values[:, b]))
            if len(both) < 10:
                continue  # a correlation from fewer says nothing
            if len(both) > MOST_DENSE:
                both = np.sort(rng.choice(both, MOST_DENSE, replace=False))
            survey = None if labels is None else labels[both]
            white = [
                _whitened(points[both], values[both, v], noise[both, v], drift[both], survey, fitted[v]) for v in (a, b)
            ]
            spread = np.sqrt((white[0] @ white[0]) * (white[1] @ white[1]))
            if spread > 0:
                result[a, b] = result[b, a] = six_digits(float(np.clip(white[0] @ white[1] / spread, -0.999, 0.999)))
    return _nearest_correlation(result)


def _whitened(points: Array, values: Array, noise: Array, drift: Array, survey: Any, c: Covariance) -> Array:
    from scipy.linalg import cholesky, solve_triangular

    k = c.matrix(points) + np.diag(noise + c.noise + 1e-9 * c.sill)
    if survey is not None:
        k += c.survey * (survey[:, None] == survey[None, :])
    factor = cholesky(k, lower=True)
    white = solve_triangular(factor, np.column_stack([drift, values]), lower=True)
    design, z = white[:, :-1], white[:, -1]
    residual: Array = z - design @ np.linalg.lstsq(design, z, rcond=None)[0]
    return residual


def _nearest_correlation(matrix: Array) -> Array:
    """Lift negative eigenvalues (pairs were estimated apart) and put ones back on the diagonal."""
    value, vector = np.linalg.eigh(matrix)
    if value.min() >= 1e-6:
        return matrix
    lifted = (vector * np.maximum(value, 1e-6)) @ vector.T
    d = np.sqrt(np.diag(lifted))
    lifted = lifted / d[:, None] / d[None, :]
    result: Array = 0.5 * (lifted + lifted.T)
    np.fill_diagonal(result, 1.0)
    return result
