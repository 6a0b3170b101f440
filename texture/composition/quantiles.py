"""Quantiles of each part, and of its mean over a cell, for normal log-ratio coordinates.

- A part with one split on its path is a monotone function of one normal: closed form.
- A part with two is a product of two logistic functions, W = logistic(a) logistic(b). P(W > w) is an integral along
  the curve logistic(a) logistic(b) = w. With t = a - b as parameter the curve is smooth on the scale of 1 everywhere, so that
  panels of six Gauss-Legendre nodes no longer than the integrand's own scale reach 1e-5 at any pair of variances
  and any correlation; a Newton iteration between sure brackets then finds the quantile.
- Three and more: the last split is integrated exactly given 1024 Sobol normal draws of the others.
- ``ilr``, ``alr``, and products of ``shares``: order statistics of 4096 Sobol normal draws.

The cell mean: with ``within`` the coordinates are a between-cell normal plus a within-cell normal, and what is
asked for is the quantile of the mean over the second. The mean of a logistic function over a normal is nearly
a logistic function of a straight line; the line is fitted through two points of each coordinate's between-cell distribution, so
that the problem is the one above with other means and variances. Covariance within the cell shifts a coordinate given those above
it (Stein's lemma, first order).
"""

import math
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from numba import njit, prange

from texture.composition.closure import Array
from texture.composition.expected import as_moments, has_nan, normal_draws, refuse_matrix
from texture.composition.kernels import cholesky, logistic, logistic_normal, normal_cdf, normal_pdf, normal_quantile
from texture.errors import CompositionError

if TYPE_CHECKING:
    from texture.composition.logratio import LogRatio

__all__ = ["cell_mean_moments", "quantiles"]

_NODES, _NODE_WEIGHTS = np.polynomial.legendre.leggauss(6)
_REACH = 4.5  # standard deviations; what lies beyond weighs 7e-6
_TOLERANCE = 2e-5  # of a fraction, where Newton stops
_OUTER_DRAWS = 1024
# |correlation| is held below this: at 1 two normals are one and the integrand a step.
_MOST_CORRELATION = 0.9999
_PATH, _LINEAR, _SHARES = 0, 1, 2


def quantiles(
    logratio: "LogRatio",
    mean: npt.ArrayLike,
    variance: npt.ArrayLike,
    levels: npt.ArrayLike,
    *,
    within: npt.ArrayLike | None = None,
) -> Array:
    """Quantiles of each part when the coordinates are normal.

    Parameters
    ----------
    logratio : LogRatio
    mean : array-like, shape (n, d)
    variance : array-like, shape (n, d) or (n, d, d)
        Variances, or covariance matrices.
    levels : array-like, shape (q,)
        Probabilities between 0 and 1.
    within : array-like, shape (d,) or (n, d), optional
        The part of the variance that averages out inside a cell. At most the variance itself. The quantiles are then
        those of the cell mean. Correlations are taken to be the same within and between cells. Only for ``tree``;
        ``shares`` average in proportion; ``ilr`` and ``alr`` refuse.

    Returns
    -------
    fractions : float array, shape (q, n, D)
        A NaN anywhere in a row gives a NaN row. Parts are taken one by one and do not sum to 1.

    Raises
    ------
    CompositionError
        For levels outside (0, 1), shapes that do not fit, or more variance within cells than there is.

    Examples
    --------
    >>> from texture.composition import LogRatio
    >>> lr = LogRatio(["mud", "sand", "gravel"])
    >>> lr.quantiles([[0.0, -2.0]], [[1.0, 1.0]], [0.05, 0.5, 0.95]).round(3)[:, 0]
    array([[0.162, 0.418, 0.014],
           [0.5  , 0.429, 0.059],
           [0.838, 0.715, 0.201]])
    """
    m, v, correlated = as_moments(logratio, mean, variance)
    q = np.atleast_1d(np.asarray(levels, dtype=np.float64))
    if q.ndim != 1 or not ((q > 0) & (q < 1)).all():
        raise CompositionError(f"levels = {levels!r}, expected probabilities between 0 and 1")
    covariance = v if correlated else v[:, :, None] * np.eye(m.shape[1])
    if within is not None:
        m, covariance = cell_mean_moments(logratio, m, covariance, within)
    z = np.array([normal_quantile(level) for level in q])
    out = np.full((len(q), len(m), logratio.n_parts), np.nan)
    status = np.zeros(len(m), dtype=np.bool_)
    index, sign = logratio.partition.path_arrays()
    if logratio.kind == "tree":
        depth = index.shape[1]
        draws = normal_draws(depth - 1, _OUTER_DRAWS) if depth > 2 else np.empty((0, 1))
        _tree_kernel(m, covariance, index, sign, z, q, draws, out, status)
    else:
        basis = np.zeros((0, 0)) if logratio.kind == "shares" else logratio.log_basis
        _draw_kernel(m, covariance, index, sign, basis, q, normal_draws(logratio.n_coordinates), out, status)
    refuse_matrix(status)
    return out


def cell_mean_moments(
    logratio: "LogRatio", mean: Array, covariance: Array, within: npt.ArrayLike
) -> tuple[Array, Array]:
    """Mean and covariance of normal coordinates whose back-transform is (nearly) the cell mean.

    Parameters
    ----------
    logratio : LogRatio
        Of kind ``tree`` or ``shares``.
    mean : float array, shape (n, d)
    covariance : float array, shape (n, d, d)
    within : array-like, shape (d,) or (n, d)
        Variance that averages out inside a cell.

    Notes
    -----
    The largest error of a quantile of a part against brute force, over means in [-4, 4], total variances from 0.25
    to 9, half of it within cells, is stated and held in the tests.
    """
    if not logratio.amalgamates:
        raise CompositionError(f"within = ... works with kind 'tree' and 'shares', not with {logratio.kind!r}")
    total = np.einsum("nii->ni", covariance)
    inside = np.asarray(within, dtype=np.float64)
    if inside.shape not in (total.shape, total.shape[1:]):
        raise CompositionError(f"within has shape {inside.shape}, expected {total.shape[1:]} or {total.shape}")
    inside = np.broadcast_to(inside, total.shape)
    if (inside < 0).any() or (inside > total * (1 + 1e-9) + 1e-12).any():
        row = int(np.argmax(((inside < 0) | (inside > total * (1 + 1e-9) + 1e-12)).any(axis=1)))
        raise CompositionError(
            f"row {row} (counted from 0): within = {inside[row]}, expected from zero to the variance {total[row]}"
        )
    between = np.maximum(total - inside, 0.0)
    shrink = np.sqrt(np.divide(between, total, out=np.zeros_like(total), where=total > 0))
    if logratio.kind == "shares":
        return mean, covariance * shrink[:, :, None] * shrink[:, None, :]
    intercept_at_mean = np.empty_like(mean)
    slope = np.empty_like(mean)
    _line_kernel(mean, between, inside, covariance, *_parents(logratio), intercept_at_mean, slope)
    scale = slope * shrink
    return intercept_at_mean, covariance * scale[:, :, None] * scale[:, None, :]


def _parents(logratio: "LogRatio") -> tuple[npt.NDArray[np.int64], Array]:
    """For each split the splits above it, -1 after the end, and the side it hangs from (+1 numerator)."""
    d = logratio.n_coordinates
    above = np.full((d, d), -1, dtype=np.int64)
    side = np.zeros((d, d))
    for path in logratio.partition.paths:
        for level, (split, _) in enumerate(path):
            for k in range(level):
                above[split, k] = path[k][0]
                side[split, k] = 1.0 if path[k][1] else -1.0
    return above, side


@njit(cache=True, parallel=True)
def _line_kernel(mean, between, inside, covariance, above, side, out_mean, out_slope):  # type: ignore[no-untyped-def]
    """Line in b for logit E[logistic(b + within)] through two points of b's distribution."""
    n, d = mean.shape
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]):
            out_mean[row] = math.nan
            out_slope[row] = math.nan
            continue
        for i in range(d):
            vw = inside[row, i]
            shift = 0.0
            for k in range(d):
                j = above[i, k]
                if j < 0:
                    break
                vj = covariance[row, j, j]
                if vw > 0.0 and vj > 0.0 and inside[row, j] > 0.0:
                    # Stein: weighting a normal with f moves its mean by covariance x E f' / E f; f is the share above.
                    rho = covariance[row, i, j] / math.sqrt(covariance[row, i, i] * vj)
                    towards = side[i, k] * mean[row, j]
                    p = logistic_normal(towards, inside[row, j])
                    e = 1e-3
                    derivative = (
                        logistic_normal(towards + e, inside[row, j]) - logistic_normal(towards - e, inside[row, j])
                    ) / (2.0 * e)
                    shift += rho * math.sqrt(vw * inside[row, j]) * side[i, k] * derivative / max(p, 1e-12)
            half = max(math.sqrt(between[row, i]), 0.05)
            lo = _logit_mean(mean[row, i] + shift - half, vw)
            hi = _logit_mean(mean[row, i] + shift + half, vw)
            out_slope[row, i] = (hi - lo) / (2.0 * half)
            out_mean[row, i] = 0.5 * (lo + hi)


@njit(cache=True)
def _logit_mean(b: float, variance: float) -> float:
    small = max(logistic_normal(-abs(b), variance), 1e-300)
    value = math.log((1.0 - small) / small)
    return value if b >= 0.0 else -value


@njit(cache=True, parallel=True)
def _tree_kernel(mean, covariance, index, sign, z, q, draws, out, status):  # type: ignore[no-untyped-def]
    n = mean.shape[0]
    parts, depth = index.shape
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]):
            continue
        m = np.zeros(depth)
        sub = np.zeros((depth, depth))
        for part in range(parts):
            length = 0
            while length < depth and index[part, length] >= 0:
                length += 1
            for a in range(length):
                i = index[part, a]
                m[a] = sign[part, a] * mean[row, i]
                for b in range(length):
                    sub[a, b] = sign[part, a] * sign[part, b] * covariance[row, i, index[part, b]]
            if length == 1:
                for k in range(z.size):
                    out[k, row, part] = logistic(m[0] + z[k] * math.sqrt(sub[0, 0]))
            elif length == 2:
                if sub[0, 1] ** 2 > 1.000002 * sub[0, 0] * sub[1, 1]:
                    status[row] = True
                    break
                _pair_quantiles(m, sub, z, q, out[:, row, part])
            else:
                factor = np.zeros((length, length))
                if not cholesky(sub[:length, :length], factor):
                    status[row] = True
                    break
                _path_quantiles(m[:length], factor, q, draws, out[:, row, part])


@njit(cache=True)
def _pair_quantiles(m, sub, z, q, out):  # type: ignore[no-untyped-def]
    """Quantiles of logistic(a) logistic(b) for one bivariate normal."""
    sa, sb = math.sqrt(sub[0, 0]), math.sqrt(sub[1, 1])
    # u, along which we integrate, has the smaller spread; the other keeps the step smooth.
    if sa <= sb:
        mu, su, mv, sv = m[0], sa, m[1], sb
    else:
        mu, su, mv, sv = m[1], sb, m[0], sa
    if sv < 1e-7:
        for k in range(q.size):
            out[k] = logistic(mu) * logistic(mv)
        return
    rho = 0.0
    if su > 1e-7:
        rho = sub[0, 1] / (sa * sb)
        rho = min(max(rho, -_MOST_CORRELATION), _MOST_CORRELATION)
    su = max(su, 1e-7)
    cross = math.sqrt(1.0 - rho * rho)
    A, B = logistic(mu), logistic(mv)
    w = A * B
    # Spread of logit W to first order, for the first guess only.
    da, db = (1.0 - A) / (1.0 - w), (1.0 - B) / (1.0 - w)
    slope = math.sqrt(max((da * su) ** 2 + (db * sv) ** 2 + 2.0 * rho * da * db * su * sv, 1e-12))
    omega = -math.log((1.0 - w) / w)
    last_z = 0.0
    for k in range(q.size):
        # W is below either factor, and above the product of the factors' quantiles at half the level.
        half = normal_quantile(0.5 * q[k])
        high = min(mu + z[k] * su, mv + z[k] * sv)
        low = _logit_product(mu + half * su, mv + half * sv)
        omega = min(max(omega + (z[k] - last_z) * slope, low), high)
        for _ in range(60):
            F, dF = _pair_cdf(omega, mu, su, mv, sv, rho, cross)
            if q[k] < F:
                high = omega
            else:
                low = omega
            here = logistic(omega)
            reached = 0.0
            if 1e-12 < F < 1.0 - 1e-12 and dF > 0.0:
                # Newton on the normal score of F, which is close to a line.
                reached = normal_quantile(F)
                slope = normal_pdf(reached) / dF
                step = (z[k] - reached) * slope
                following = omega + step
            else:
                following = math.inf
            if not low < following < high:
                following = 0.5 * (low + high)
            change = abs(logistic(following) - here)
            omega = following
            # Newton doubles its digits: a small step has a far smaller error behind it.
            if change < 10.0 * _TOLERANCE and abs(z[k] - reached) < 0.05:
                break
            if logistic(high) - logistic(low) < _TOLERANCE:
                break
        out[k] = logistic(omega)
        last_z = z[k]


@njit(cache=True)
def _logit_product(a: float, b: float) -> float:
    """Logit of logistic(a) logistic(b)."""
    x, y = math.exp(-max(a, -300.0)), math.exp(-max(b, -300.0))
    return -math.log(x + y + x * y)


@njit(cache=True)
def _pair_cdf(omega, mu, su, mv, sv, rho, cross):  # type: ignore[no-untyped-def]
    """P(logit W <= omega) and its derivative."""
    R = math.exp(-omega)  # 1 / w - 1; the curve is x + y + x y = R with x = exp(-u), y = exp(-v)
    w = logistic(omega)
    beta = rho * sv / su
    sc = sv * cross
    # Ends of the curve that matter, in t = u - v, rising with u and falling with v.
    t_lo, t_hi = -700.0, 700.0
    x = math.exp(-(mu + _REACH * su))
    if x >= R:
        return 1.0, 0.0
    t_hi = min(t_hi, mu + _REACH * su - math.log((1.0 + x) / (R - x)))
    x = math.exp(-(mu - _REACH * su))
    if x < R:
        t_lo = max(t_lo, mu - _REACH * su - math.log((1.0 + x) / (R - x)))
    y = math.exp(-(mv + _REACH * sv))
    if y >= R:
        return 1.0, 0.0
    t_lo = max(t_lo, math.log((1.0 + y) / (R - y)) - (mv + _REACH * sv))
    above = 0.0
    y = math.exp(-(mv - _REACH * sv))
    if y < R:
        u_end = math.log((1.0 + y) / (R - y))
        t_end = u_end - (mv - _REACH * sv)
        if t_end < t_hi:
            # Beyond this v is above the curve for sure, and only u counts.
            t_hi = max(t_end, t_lo)
            above = normal_cdf((mu - u_end) / su)
    density = 0.0
    t = t_lo
    while t < t_hi:
        length = min(2.5, t_hi - t)
        # The slope of u grows along t, that of v falls: look at both ends of the panel.
        for _ in range(2):
            s0, s1 = _slope(t, R), _slope(t + length, R)
            rise = max(s0, s1) / su
            bend = max(abs(s0 - 1.0 - beta * s0), abs(s1 - 1.0 - beta * s1)) / sc
            length = min(length, 2.8 / max(rise, bend, 1e-9))
        for k in range(_NODES.size):
            tt = t + 0.5 * length * (1.0 + _NODES[k])
            E = math.exp(tt)
            x = 2.0 * R / ((1.0 + E) + math.sqrt((1.0 + E) ** 2 + 4.0 * R * E))
            u = -math.log(x)
            v = u - tt
            du = E * (x + 1.0) / (2.0 * E * x + 1.0 + E)
            g = (v - mv - beta * (u - mu)) / sc
            weight = 0.5 * length * _NODE_WEIGHTS[k] * du * normal_pdf((u - mu) / su) / su
            above += weight * normal_cdf(-g)
            density += weight * normal_pdf(g) * (1.0 - w) * (1.0 + 1.0 / (x * E)) / sc
        t += length
    return 1.0 - above, density


@njit(cache=True)
def _slope(t: float, R: float) -> float:
    """Slope of u along the curve, by t."""
    E = math.exp(t)
    x = 2.0 * R / ((1.0 + E) + math.sqrt((1.0 + E) ** 2 + 4.0 * R * E))
    return E * (x + 1.0) / (2.0 * E * x + 1.0 + E)


@njit(cache=True)
def _path_quantiles(m, factor, q, draws, out):  # type: ignore[no-untyped-def]
    """Quantiles of a product of three or more logistics, the last one integrated exactly given draws."""
    last = m.size - 1
    count = draws.shape[0]
    logs = np.empty(count)
    centre = np.empty(count)
    for k in range(count):
        product = 1.0
        for a in range(last):
            y = m[a]
            for b in range(a + 1):
                y += factor[a, b] * draws[k, b]
            product *= logistic(y)
        logs[k] = product
        centre[k] = m[last]
        for b in range(last):
            centre[k] += factor[last, b] * draws[k, b]
    spread = max(factor[last, last], 1e-6)
    for level in range(q.size):
        low, high = 0.0, 1.0
        while high - low > _TOLERANCE:
            w = 0.5 * (low + high)
            F = 0.0
            for k in range(count):
                if logs[k] <= w:
                    F += 1.0
                else:
                    F += normal_cdf((math.log(w / (logs[k] - w)) - centre[k]) / spread)
            if q[level] * count < F:
                high = w
            else:
                low = w
        out[level] = 0.5 * (low + high)


@njit(cache=True, parallel=True)
def _draw_kernel(mean, covariance, index, sign, basis, q, draws, out, status):  # type: ignore[no-untyped-def]
    """Order statistics of draws: closed exp(y @ basis), or products of clipped shares where basis is empty."""
    n, d = mean.shape
    parts, depth = index.shape
    count = draws.shape[0]
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]):
            continue
        factor = np.zeros((d, d))
        if not cholesky(covariance[row], factor):
            status[row] = True
            continue
        values = np.empty((parts, count))
        y = np.empty(d)
        for k in range(count):
            for i in range(d):
                y[i] = mean[row, i]
                for j in range(i + 1):
                    y[i] += factor[i, j] * draws[k, j]
            if basis.size:
                top = -math.inf
                for p in range(parts):
                    values[p, k] = 0.0
                    for i in range(d):
                        values[p, k] += y[i] * basis[i, p]
                    top = max(top, values[p, k])
                total = 0.0
                for p in range(parts):
                    values[p, k] = math.exp(values[p, k] - top)
                    total += values[p, k]
                for p in range(parts):
                    values[p, k] /= total
            else:
                for p in range(parts):
                    values[p, k] = 1.0
                    for a in range(depth):
                        i = index[p, a]
                        if i < 0:
                            break
                        share = min(max(y[i], 0.0), 1.0)
                        values[p, k] *= share if sign[p, a] > 0.0 else 1.0 - share
        for p in range(parts):
            ordered = np.sort(values[p])
            for level in range(q.size):
                place = min(max(q[level] * count - 0.5, 0.0), count - 1.0)
                below = min(int(place), count - 2)
                share = place - below
                out[level, row, p] = ordered[below] * (1.0 - share) + ordered[below + 1] * share
