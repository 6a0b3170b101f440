"""Quantiles of each part, and of its mean over a cell, for normal log-ratio coordinates.

- A part with one split on its path is a monotone function of one normal: closed form.
- A part with two is a product of two logistic functions, W = logistic(a) logistic(b). P(W > w) is an integral along
  the curve logistic(a) logistic(b) = w. With t = a - b as parameter the curve is smooth on the scale of 1 everywhere, so that
  panels of six Gauss-Legendre nodes no longer than the integrand's own scale reach 1e-5 at any pair of variances
  and any correlation; a Newton iteration between sure brackets then finds the quantile.
- Three and more: the last split is integrated exactly given 1024 Sobol normal draws of the others.
- ``ilr``, ``alr``, and products of ``shares``: order statistics of 4096 Sobol normal draws.

The cell mean: with ``within`` the coordinates are a between-cell normal plus a within-cell normal, and what is
asked for is the quantile of the mean over the second. The mean of one logistic function over a normal is known in
closed form, and rises with the between-cell value; its logit takes the coordinate's place in the integrals above, through a
table of 17 knots with exact slopes for each row and coordinate. The mean of a product of two is the product of the means with
the second coordinate shifted by covariance × d ln(mean of the first) (Stein's lemma, exact to first order in the
covariance within the cell).
"""

import math
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from numba import njit, prange

from texture.composition.closure import Array
from texture.composition.expected import as_moments, normal_draws, refuse_matrix
from texture.composition.kernels import (
    cholesky,
    has_nan,
    inverse_row,
    logistic,
    logistic_normal,
    logistic_normal_slope,
    normal_cdf,
    normal_pdf,
    normal_quantile,
)
from texture.errors import CompositionError

if TYPE_CHECKING:
    from texture.composition.logratio import LogRatio

__all__ = ["quantiles"]

_NODES, _NODE_WEIGHTS = np.polynomial.legendre.leggauss(6)
_REACH = 4.5  # standard deviations; what lies beyond weighs 7e-6
_TOLERANCE = 2e-5  # of a fraction, where Newton stops
_OUTER_DRAWS = 1024
# |correlation| is held below this: at 1 two normals are one and the integrand a step.
_MOST_CORRELATION = 0.9999
_LEAST_SPREAD = 1e-7
_KNOTS = 17


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
    array([[0.162, 0.129, 0.009],
           [0.5  , 0.414, 0.054],
           [0.838, 0.743, 0.23 ]])
    """
    m, v, correlated = as_moments(logratio, mean, variance)
    q = np.atleast_1d(np.asarray(levels, dtype=np.float64))
    if q.ndim != 1 or not ((q > 0) & (q < 1)).all():
        raise CompositionError(f"levels = {levels!r}, expected probabilities between 0 and 1")
    covariance = v if correlated else v[:, :, None] * np.eye(m.shape[1])
    inside = np.empty((0, *covariance.shape[1:]))
    if within is not None:
        covariance, inside = _share_out(logratio, covariance, within)
    z = np.array([normal_quantile(level) for level in q])
    out = np.full((len(q), len(m), logratio.n_parts), np.nan)
    status = np.zeros(len(m), dtype=np.bool_)
    index, sign = logratio.partition.path_arrays()
    if logratio.kind == "tree":
        depth = index.shape[1]
        draws = normal_draws(depth - 1, _OUTER_DRAWS) if depth > 2 else np.empty((0, 1))
        _tree_kernel(m, covariance, inside, index, sign, z, q, draws, out, status)
    else:
        basis = np.zeros((0, 0)) if logratio.kind == "shares" else logratio.log_basis
        _draw_kernel(m, covariance, index, sign, basis, q, normal_draws(logratio.n_coordinates), out, status)
    refuse_matrix(status)
    # Each level is found by itself, to 1e-4; where the whole spread is smaller than that they must still not cross.
    order = np.argsort(q)
    out[order] = np.maximum.accumulate(out[order], axis=0)
    return out


def _share_out(logratio: "LogRatio", covariance: Array, within: npt.ArrayLike) -> tuple[Array, Array]:
    """Covariance between and within cells, with the same correlations in both."""
    if not logratio.amalgamates:
        raise CompositionError(f"within = ... works with kind 'tree' and 'shares', not with {logratio.kind!r}")
    total = np.einsum("nii->ni", covariance)
    given = np.asarray(within, dtype=np.float64)
    if given.shape not in (total.shape, total.shape[1:]):
        raise CompositionError(f"within has shape {given.shape}, expected {total.shape[1:]} or {total.shape}")
    given = np.broadcast_to(given, total.shape)
    # A billionth over is rounding in a sum of sills.
    wrong = (given < 0) | (given > total * (1 + 1e-9) + 1e-12)
    if wrong.any():
        row = int(np.argmax(wrong.any(axis=1)))
        raise CompositionError(
            f"row {row} (counted from 0): within = {given[row]}, expected from zero to the variance {total[row]}"
        )
    part = np.clip(np.divide(given, total, out=np.zeros_like(total), where=total > 0), 0.0, 1.0)
    outer, inner = np.sqrt(1.0 - part), np.sqrt(part)
    return covariance * outer[:, :, None] * outer[:, None, :], covariance * inner[:, :, None] * inner[:, None, :]


@njit(cache=True)
def _fill_table(mean: float, spread: float, variance: float, table: Array) -> None:
    """Knots of T(b) = logit E[logistic(b + N(0, variance))]: columns b, T, dT/db."""
    reach = max((_REACH + 0.5) * spread, 0.5)
    for k in range(_KNOTS):
        b = mean + reach * (2.0 * k / (_KNOTS - 1.0) - 1.0)
        small = max(logistic_normal(-abs(b), variance), 1e-300)
        value = math.log((1.0 - small) / small)
        table[k, 0] = b
        table[k, 1] = value if b >= 0.0 else -value
        table[k, 2] = min(max(logistic_normal_slope(b, variance) / (small * (1.0 - small)), 1e-6), 1.0)


@njit(cache=True)
def _find(table, column, value):  # type: ignore[no-untyped-def]
    low, high = 0, _KNOTS - 1
    while high - low > 1:
        middle = (low + high) // 2
        if table[middle, column] <= value:
            low = middle
        else:
            high = middle
    return low


@njit(cache=True)
def _from_table(value, sign, table, backwards):  # type: ignore[no-untyped-def]
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
    # Cubic Hermite between knots.
    h = x1 - x0
    r = (x - x0) / h
    bend = 3.0 * (y1 - y0) / h - 2.0 * s0 - s1
    twist = s0 + s1 - 2.0 * (y1 - y0) / h
    y = y0 + h * r * (s0 + r * (bend + r * twist))
    return sign * y, s0 + r * (2.0 * bend + 3.0 * r * twist)


@njit(cache=True, parallel=True)
def _tree_kernel(mean, covariance, inside, index, sign, z, q, draws, out, status):  # type: ignore[no-untyped-def]
    n, d = mean.shape
    parts, depth = index.shape
    smoothed = inside.shape[0] > 0
    for row in prange(n):
        if has_nan(mean[row]) or has_nan(covariance[row]) or (smoothed and has_nan(inside[row])):
            continue
        m = np.zeros(depth)
        s = np.zeros(depth)
        sub = np.zeros((depth, depth))
        sub_in = np.zeros((depth, depth))
        tables = np.zeros((d, _KNOTS if smoothed else 0, 3))
        if smoothed:
            for i in range(d):
                _fill_table(mean[row, i], math.sqrt(covariance[row, i, i]), inside[row, i, i], tables[i])
        for part in range(parts):
            length = 0
            while length < depth and index[part, length] >= 0:
                length += 1
            for a in range(length):
                i = index[part, a]
                s[a] = sign[part, a]
                m[a] = s[a] * mean[row, i]
                for b in range(length):
                    both = s[a] * sign[part, b]
                    sub[a, b] = both * covariance[row, i, index[part, b]]
                    sub_in[a, b] = both * inside[row, i, index[part, b]] if smoothed else 0.0
            if length == 1:
                for k in range(z.size):
                    out[k, row, part] = logistic_normal(m[0] + z[k] * math.sqrt(sub[0, 0]), sub_in[0, 0])
            elif length == 2:
                if sub[0, 1] ** 2 > 1.000002 * sub[0, 0] * sub[1, 1]:
                    status[row] = True
                    break
                first, second = tables[index[part, 0]], tables[index[part, 1]]
                _pair_quantiles(m, s, sub, sub_in[0, 1], first, second, z, q, out[:, row, part])
            else:
                factor = np.zeros((length, length))
                if not cholesky(sub[:length, :length], factor):
                    status[row] = True
                    break
                table = tables[index[part, length - 1]]
                _path_quantiles(m[:length], s[length - 1], factor, sub_in, table, q, draws, out[:, row, part])


@njit(cache=True)
def _pair_quantiles(m, sign, sub, shared, table_a, table_b, z, q, out):  # type: ignore[no-untyped-def]
    """Quantiles of logistic(T(a)) logistic(T(b)) for one bivariate normal; `shared` is the covariance within."""
    sa, sb = math.sqrt(sub[0, 0]), math.sqrt(sub[1, 1])
    # u, along which we integrate, has the smaller spread; the other keeps the step smooth.
    if sa <= sb:
        mu, su, mv, sv, eu, ev, table_u, table_v = m[0], sa, m[1], sb, sign[0], sign[1], table_a, table_b
    else:
        mu, su, mv, sv, eu, ev, table_u, table_v = m[1], sb, m[0], sa, sign[1], sign[0], table_b, table_a
    rho = 0.0
    if su > _LEAST_SPREAD:
        rho = sub[0, 1] / (sa * sb)
        rho = min(max(rho, -_MOST_CORRELATION), _MOST_CORRELATION)
    su = max(su, _LEAST_SPREAD)
    sv = max(sv, _LEAST_SPREAD)
    centre_u, bend_u = _from_table(mu, eu, table_u, False)
    centre_v, bend_v = _from_table(mv, ev, table_v, False)
    A, B = logistic(centre_u), logistic(centre_v)
    w = A * B
    # Spread of logit W to first order, for the first guess only.
    da, db = bend_u * (1.0 - A) / (1.0 - w), bend_v * (1.0 - B) / (1.0 - w)
    slope = math.sqrt(max((da * su) ** 2 + (db * sv) ** 2 + 2.0 * rho * da * db * su * sv, 1e-12))
    omega = _logit_product(centre_u, centre_v)
    last_z = 0.0
    for k in range(q.size):
        # W is below either factor, and above the product of the factors' quantiles at half the level.
        half = normal_quantile(0.5 * q[k])
        high = min(
            _from_table(mu + z[k] * su, eu, table_u, False)[0],
            _from_table(mv + z[k] * sv + abs(shared), ev, table_v, False)[0],
        )
        low = _logit_product(
            _from_table(mu + half * su, eu, table_u, False)[0],
            _from_table(mv + half * sv - abs(shared), ev, table_v, False)[0],
        )
        omega = min(max(omega + (z[k] - last_z) * slope, low), high)
        for _ in range(60):
            F, dF = _pair_cdf(omega, mu, su, mv, sv, rho, eu, ev, shared, table_u, table_v)
            if q[k] < F:
                high = omega
            else:
                low = omega
            here = logistic(omega)
            reached = 0.0
            following = math.inf
            if 1e-12 < F < 1.0 - 1e-12 and dF > 0.0:
                # Newton on the normal score of F, which is close to a line.
                reached = normal_quantile(F)
                slope = normal_pdf(reached) / dF
                following = omega + (z[k] - reached) * slope
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
def _pair_cdf(omega, mu, su, mv, sv, rho, eu, ev, shared, table_u, table_v):  # type: ignore[no-untyped-def]
    """P(logit W <= omega) and its derivative; the curve lives in p = T(u), r = T(v)."""
    R = math.exp(-omega)  # 1 / w - 1; the curve is x + y + x y = R with x = exp(-p), y = exp(-r)
    w = logistic(omega)
    beta = rho * sv / su
    sc = sv * math.sqrt(1.0 - rho * rho)
    # Ends of the curve that matter, in t = p - r, rising with u and falling with v.
    p, _ = _from_table(mu + _REACH * su, eu, table_u, False)
    x = math.exp(-p)
    if x >= R:
        return 1.0, 0.0
    t_hi = p - math.log((1.0 + x) / (R - x))
    t_lo = -600.0
    p, _ = _from_table(mu - _REACH * su, eu, table_u, False)
    x = math.exp(-p)
    if x < R:
        t_lo = p - math.log((1.0 + x) / (R - x))
    r, _ = _from_table(mv + _REACH * sv + abs(shared), ev, table_v, False)
    y = math.exp(-r)
    if y >= R:
        return 1.0, 0.0
    t_lo = max(t_lo, math.log((1.0 + y) / (R - y)) - r)
    above = 0.0
    r, _ = _from_table(mv - _REACH * sv - abs(shared), ev, table_v, False)
    y = math.exp(-r)
    if y < R:
        p = math.log((1.0 + y) / (R - y))
        if p - r < t_hi:
            # Beyond this v is above the curve for sure, and only u counts.
            t_hi = max(p - r, t_lo)
            above = normal_cdf((mu - _from_table(p, eu, table_u, True)[0]) / su)
    steepest_u, steepest_v = _steepest(table_u), _steepest(table_v)
    density = 0.0
    t = t_lo
    while t < t_hi:
        length = min(2.5, t_hi - t)
        # The slope of u grows along t, that of v falls: look at both ends of the panel.
        for _ in range(2):
            s0, s1 = _slope(t, R), _slope(t + length, R)
            rise = max(s0, s1) * steepest_u / su
            bend = max(
                abs((s0 - 1.0) * steepest_v - beta * s0 * steepest_u),
                abs((s1 - 1.0) * steepest_v - beta * s1 * steepest_u),
            )
            length = min(length, 2.8 / max(rise, bend / sc, 1e-9))
        for k in range(_NODES.size):
            tt = t + 0.5 * length * (1.0 + _NODES[k])
            E = math.exp(tt)
            x = 2.0 * R / ((1.0 + E) + math.sqrt((1.0 + E) ** 2 + 4.0 * R * E))
            p = -math.log(x)
            u, du = _from_table(p, eu, table_u, True)
            v, dv = _from_table(p - tt, ev, table_v, True)
            if shared != 0.0:
                # d ln(mean of the first factor) / du = (1 - A) dT/du, and 1 - A = x / (1 + x).
                v -= shared * x / (1.0 + x) / du
            du *= E * (x + 1.0) / (2.0 * E * x + 1.0 + E)
            g = (v - mv - beta * (u - mu)) / sc
            weight = 0.5 * length * _NODE_WEIGHTS[k] * du * normal_pdf((u - mu) / su) / su
            above += weight * normal_cdf(-g)
            density += weight * normal_pdf(g) * dv * (1.0 - w) * (1.0 + 1.0 / (x * E)) / sc
        t += length
    return 1.0 - above, density


@njit(cache=True)
def _steepest(table: Array) -> float:
    """Largest slope of the inverse of T."""
    return 1.0 / table[:, 2].min() if table.shape[0] else 1.0


@njit(cache=True)
def _slope(t: float, R: float) -> float:
    """Slope of p along the curve, by t."""
    E = math.exp(t)
    x = 2.0 * R / ((1.0 + E) + math.sqrt((1.0 + E) ** 2 + 4.0 * R * E))
    return E * (x + 1.0) / (2.0 * E * x + 1.0 + E)


@njit(cache=True)
def _path_quantiles(m, sign, factor, inside, table, q, draws, out):  # type: ignore[no-untyped-def]
    """Quantiles of a product of three or more logistics, the last one integrated exactly given draws."""
    last = m.size - 1
    count = draws.shape[0]
    products = np.empty(count)
    centres = np.empty(count)
    tilt = np.empty(last)
    for k in range(count):
        product = 1.0
        for a in range(last + 1):
            y = m[a]
            for b in range(min(a, last - 1) + 1):
                y += factor[a, b] * draws[k, b]
            for b in range(a):  # within-cell covariance with the splits above
                if inside[a, b] != 0.0:
                    y += inside[a, b] * tilt[b]
            if a == last:
                centres[k] = y
            else:
                share = logistic_normal(y, inside[a, a])
                tilt[a] = logistic_normal_slope(y, inside[a, a]) / max(share, 1e-12)
                product *= share
        products[k] = product
    spread = max(factor[last, last], 1e-6)
    for level in range(q.size):
        low, high = 0.0, 1.0
        while high - low > _TOLERANCE:
            w = 0.5 * (low + high)
            F = 0.0
            for k in range(count):
                if products[k] <= w:
                    F += 1.0
                else:
                    edge, _ = _from_table(math.log(w / (products[k] - w)), sign, table, True)
                    F += normal_cdf((edge - centres[k]) / spread)
            if q[level] * count < F:
                high = w
            else:
                low = w
        out[level] = 0.5 * (low + high)


@njit(cache=True, parallel=True)
def _draw_kernel(mean, covariance, index, sign, basis, q, draws, out, status):  # type: ignore[no-untyped-def]
    """Order statistics of draws: closed exp(y @ basis), or products of clipped shares where basis is empty."""
    n, d = mean.shape
    parts = index.shape[0]
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
        x = np.empty(parts)
        shares = np.empty((2, d))
        for k in range(count):
            for i in range(d):
                y[i] = mean[row, i]
                for j in range(i + 1):
                    y[i] += factor[i, j] * draws[k, j]
            inverse_row(y, index, sign, basis, True, shares, x)
            for p in range(parts):
                values[p, k] = x[p]
        for p in range(parts):
            ordered = np.sort(values[p])
            for level in range(q.size):
                place = min(max(q[level] * count - 0.5, 0.0), count - 1.0)
                below = min(int(place), count - 2)
                share = place - below
                out[level, row, p] = ordered[below] * (1.0 - share) + ordered[below + 1] * share
