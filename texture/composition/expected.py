"""Expected fractions of normal log-ratio coordinates.

The mean of a back-transform is not the back-transform of the mean (Pawlowsky-Glahn & Olea 2004): integrals decide.

- ``tree``: a part is a product of logistic functions along its path. With one split on the path, or uncorrelated
  coordinates, the integral is one-dimensional and has a closed form to 3e-9 at any variance
  (`texture.composition.kernels.logistic_normal`). Correlated, the last split of a path is still integrated that
  way, and only the splits above it need nodes.
- Nodes are those of the trapezoidal rule in standardised coordinates. On a smooth function times a normal density
  it converges like Gauss-Hermite quadrature, and its step can follow the standard deviation, which a fixed
  Gauss-Hermite rule cannot: at a variance of 100, 64 Hermite nodes are still wrong in the third digit.
- Paths of four or more correlated splits, and ``ilr`` or ``alr`` with more than three coordinates, use 4096 scrambled
  Sobol normal draws with a fixed seed.
- ``shares``: the kriged share is itself an estimate of the mean. Its product moments to second order
  (exact for three parts), clipped to [0, 1] and closed.

References
----------
Pawlowsky-Glahn, V. & Olea, R.A. (2004). Geostatistical Analysis of Compositional Data. Oxford University Press.
Aitchison, J. (1986). The Statistical Analysis of Compositional Data. Chapman and Hall.
"""

import math
from functools import cache
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from numba import njit, prange

from texture.composition.closure import Array
from texture.composition.kernels import (
    cholesky,
    has_nan,
    logistic,
    logistic_normal,
    mixture_scales,
    smooth_logistic,
)
from texture.errors import CompositionError

if TYPE_CHECKING:
    from texture.composition.logratio import LogRatio

__all__ = ["as_moments", "expected", "normal_draws", "refuse_matrix"]

SOBOL_DRAWS = 4096
_SOBOL_SEED = 20240229
_Z_MAX = 5.0  # the normal tails left out weigh 6e-7


def expected(logratio: "LogRatio", mean: npt.ArrayLike, variance: npt.ArrayLike) -> Array:
    """Expected fractions when the coordinates are normal.

    Parameters
    ----------
    logratio : LogRatio
    mean : array-like, shape (n, d)
        Means of the coordinates.
    variance : array-like, shape (n, d) or (n, d, d)
        Variances, or covariance matrices.

    Returns
    -------
    fractions : float array, shape (n, D)
        Rows sum to 1 to 1e-12; a NaN anywhere in a row gives a NaN row.

    Raises
    ------
    CompositionError
        For shapes that do not fit, negative variances or a matrix that is no covariance.

    Notes
    -----
    Three parts: the largest error measured was 7e-6, over 150 random rows with means in [-8, 8], variances from 0.01 to 100
    and correlations to 0.95, against a dense grid of 801 x 801 nodes. By draws (six parts): below 8e-4.

    Examples
    --------
    >>> from texture.composition import LogRatio
    >>> LogRatio(["mud", "sand"]).expected([[2.0]], [[4.0]]).round(6)
    array([[0.7752, 0.2248]])
    """
    mean_rows, spread, correlated = as_moments(logratio, mean, variance)
    if logratio.kind == "shares":
        fractions = _expected_shares(logratio, mean_rows, spread, correlated)
    elif logratio.kind == "tree":
        fractions = _expected_tree(logratio, mean_rows, spread, correlated)
    else:
        covariance = spread if correlated else spread[:, :, None] * np.eye(spread.shape[1])
        fractions = np.empty((len(mean_rows), logratio.n_parts))
        status = np.zeros(len(mean_rows), dtype=np.bool_)
        d = logratio.n_coordinates
        draws = normal_draws(d) if d > 3 else np.empty((0, d))
        _linear_kernel(mean_rows, covariance, logratio.log_basis, draws, fractions, status)
        refuse_matrix(status)
    fractions /= fractions.sum(axis=1, keepdims=True)
    return fractions


def as_moments(logratio: "LogRatio", mean: npt.ArrayLike, variance: npt.ArrayLike) -> tuple[Array, Array, bool]:
    """Checked (n, d) means, (n, d) variances or (n, d, d) covariances, and which of the two it is."""
    d = logratio.n_coordinates
    m = np.ascontiguousarray(mean, dtype=np.float64)
    v = np.ascontiguousarray(variance, dtype=np.float64)
    if m.ndim != 2 or m.shape[1] != d:
        raise CompositionError(f"mean has shape {m.shape}, expected (n, {d})")
    if v.shape not in (m.shape, (*m.shape, d)):
        raise CompositionError(f"variance has shape {v.shape}, expected {m.shape} or {(*m.shape, d)}")
    correlated = v.ndim == 3
    diagonal = np.einsum("nii->ni", v) if correlated else v
    if np.isinf(m).any() or np.isinf(v).any():
        row = int(np.argmax(np.isinf(m).any(axis=1) | np.isinf(v.reshape(len(v), -1)).any(axis=1)))
        raise CompositionError(f"row {row} (counted from 0): a mean or variance is infinite, expected finite or NaN")
    if (diagonal < 0).any():
        row = int(np.argmax((diagonal < 0).any(axis=1)))
        raise CompositionError(f"row {row} (counted from 0): variance {diagonal[row].min():g}, expected zero or more")
    if correlated and not (v[:, ~np.eye(d, dtype=bool)] != 0).any():
        return m, np.ascontiguousarray(diagonal), False
    return m, v, correlated


@cache
def normal_draws(dimension: int, count: int = SOBOL_DRAWS) -> Array:
    """Scrambled Sobol points of fixed seed as standard normal draws, shape (count, dimension)."""
    # SciPy's statistics take half a second to import: only where draws are needed.
    from scipy.stats import norm, qmc

    points = qmc.Sobol(dimension, scramble=True, seed=_SOBOL_SEED).random(count)
    draws = np.asarray(norm.ppf(np.clip(points, 1e-12, 1 - 1e-12)), dtype=np.float64)
    draws.flags.writeable = False
    return draws


def refuse_matrix(status: npt.NDArray[np.bool_]) -> None:
    """Raise for the first row that a kernel marked as having no covariance."""
    if status.any():
        raise CompositionError(
            f"row {int(np.argmax(status))} (counted from 0): the matrix is not positive semi-definite, expected a "
            "covariance of the coordinates"
        )


def _expected_tree(logratio: "LogRatio", mean: Array, spread: Array, correlated: bool) -> Array:
    index, sign = logratio.partition.path_arrays()
    fractions = np.empty((len(mean), logratio.n_parts))
    if not correlated:
        _independent_kernel(mean, spread, index, sign, fractions)
        return fractions
    status = np.zeros(len(mean), dtype=np.bool_)
    depth = index.shape[1]
    draws = normal_draws(depth - 1) if depth > 3 else np.empty((0, 1))
    _path_kernel(mean, spread, index, sign, draws, fractions, status)
    refuse_matrix(status)
    return fractions


def _expected_shares(logratio: "LogRatio", mean: Array, spread: Array, correlated: bool) -> Array:
    fractions = np.empty((len(mean), logratio.n_parts))
    shares = np.clip(mean, 0.0, 1.0)
    for part, path in enumerate(logratio.partition.paths):
        factors = [shares[:, i] if top else 1.0 - shares[:, i] for i, top in path]
        value = np.prod(factors, axis=0)
        if correlated:
            # E[product] to second order; the sum over parts stays 1.
            for a in range(len(path)):
                for b in range(a):
                    others = [f for k, f in enumerate(factors) if k not in (a, b)]
                    same = 1.0 if path[a][1] == path[b][1] else -1.0
                    value = value + same * spread[:, path[a][0], path[b][0]] * np.prod(others, axis=0)
        fractions[:, part] = np.clip(value, 0.0, 1.0)
    fractions[np.isnan(mean).any(axis=1) | np.isnan(spread).any(axis=tuple(range(1, spread.ndim)))] = np.nan
    return fractions


@njit(cache=True, parallel=True)
def _independent_kernel(mean, variance, index, sign, out):  # type: ignore[no-untyped-def]
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


@njit(cache=True)
def _step(spread: float) -> float:
    """Trapezoidal step in standardised units: the logistic's poles stand pi / spread off the axis."""
    return min(0.9, 1.5 / spread) if spread > 0.0 else 0.9


@njit(cache=True, parallel=True)
def _path_kernel(mean, covariance, index, sign, draws, out, status):  # type: ignore[no-untyped-def]
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


@njit(cache=True)
def _path_integral(mean, factor, scales, draws):  # type: ignore[no-untyped-def]
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


@njit(cache=True, parallel=True)
def _linear_kernel(mean, covariance, basis, draws, out, status):  # type: ignore[no-untyped-def]
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
