"""Single samples of a composition in which one part may be absent: it is in a sample, or it is not."""

import numpy as np
import numpy.typing as npt
from numba import njit, prange

from texture.composition.closure import Array
from texture.composition.expected import refuse_matrix
from texture.composition.kernels import cholesky, has_nan, inverse_row
from texture.composition.presence_draws import Presence, _loadings, _take_away

__all__ = ["presence_samples"]


def presence_samples(
    presence: Presence,
    mean: npt.ArrayLike,
    covariance: npt.ArrayLike,
    probability: npt.ArrayLike,
    correlation: npt.ArrayLike,
    normals: Array,
) -> Array:
    """Fractions of samples, shape (n, m, D).

    Parameters
    ----------
    presence : Presence
    mean, covariance, probability, correlation
        As for `Presence.expected`.
    normals : float array, shape (m, d + 1)
        Standard normal draws; the last column decides, with the others, whether the part is there.
    """
    m, c, p, r = presence._checked(mean, covariance, probability, correlation)
    out = np.full((len(m), len(normals), presence.logratio.n_parts), np.nan)
    status = np.zeros(len(m), dtype=np.bool_)
    index, sign = presence.logratio.partition.path_arrays()
    draws = np.ascontiguousarray(normals, dtype=np.float64)
    _sample_kernel(m, c, p, r, index, sign, presence.column, presence.sibling, draws, out, status)
    refuse_matrix(status)
    return out


@njit(cache=True, parallel=True)
def _sample_kernel(  # type: ignore[no-untyped-def]
    mean, covariance, probability, correlation, index, sign, column, sibling, draws, out, status
):
    n, d = mean.shape
    basis = np.zeros((0, 0))
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]) or np.isnan(probability[row]):
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            continue
        load, y, shares = np.zeros(d), np.empty(d), np.empty((2, d))
        threshold, own = _loadings(probability[row], correlation[row], covariance[row], factor, load)
        for k in range(draws.shape[0]):
            hidden = threshold + own * draws[k, d]
            for i in range(d):
                hidden += load[i] * draws[k, i]
                y[i] = mean[row, i]
                for j in range(i + 1):
                    y[i] += factor[i, j] * draws[k, j]
            inverse_row(y, index, sign, basis, False, shares, out[row, k])
            _take_away(out[row, k], column, sibling, 1.0 if hidden > 0.0 else 0.0)
