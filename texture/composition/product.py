"""Compiled quantiles of a product of logistic functions of normals, for `texture.composition.quantiles`."""

import math

import numpy as np

from texture.compiling import compiled
from texture.composition.closure import Array
from texture.composition.logistic_normal import (
    logistic,
    logistic_normal,
    logistic_normal_slope,
    normal_cdf,
    normal_pdf,
    normal_quantile,
    upper_tail,
)
from texture.composition.smoothing import from_table

__all__ = ["pair_quantiles", "path_quantiles"]

_NODES, _NODE_WEIGHTS = np.polynomial.legendre.leggauss(6)
_REACH = 4.4  # standard deviations; what lies beyond weighs 1e-5
# Longest panel of six nodes, in units of the integrand's own scale and in t.
_PANEL = 3.2
_LONGEST = 3.0
_TOLERANCE = 2e-5  # of a fraction, where Newton stops
# One trapezoidal rule instead of panels where this many nodes do: the step is as long as the curve's own poles, pi off the
# axis, and the integrand's own scale allow: errors of exp(-2 pi^2 / 1.3) = 3e-7 and less, where both ends of the curve tell the scale.
_STEP = 1.3
_STEP_SCALE = 1.0
_MOST_STEPS = 40
# |correlation| is held below this: at 1 two normals are one and the integrand a step.
_MOST_CORRELATION = 0.9999
_LEAST_SPREAD = 1e-7


@compiled
def pair_quantiles(
    m: Array, sign: Array, sub: Array, shared: float, table_a: Array, table_b: Array, z: Array, q: Array, out: Array
) -> None:
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
    centre_u, bend_u = from_table(mu, eu, table_u, False)
    centre_v, bend_v = from_table(mv, ev, table_v, False)
    less_a, less_b = logistic(-centre_u), logistic(-centre_v)
    # Spread of logit W to first order, for the first guess only.
    less_w = max(less_a + less_b - less_a * less_b, 1e-300)
    da, db = bend_u * less_a / less_w, bend_v * less_b / less_w
    slope = math.sqrt(max((da * su) ** 2 + (db * sv) ** 2 + 2.0 * rho * da * db * su * sv, 1e-12))
    omega = _logit_product(centre_u, centre_v)
    last_z = 0.0
    for k in range(q.size):
        # W is below either factor, and above the product of the factors' quantiles at half the level.
        half = normal_quantile(0.5 * q[k])
        high = min(
            from_table(mu + z[k] * su, eu, table_u, False)[0],
            from_table(mv + z[k] * sv + abs(shared), ev, table_v, False)[0],
        )
        low = _logit_product(
            from_table(mu + half * su, eu, table_u, False)[0],
            from_table(mv + half * sv - abs(shared), ev, table_v, False)[0],
        )
        omega = min(max(omega + (z[k] - last_z) * slope, low), high)
        for _ in range(60):
            F, dF = _pair_cdf(omega, mu, su, mv, sv, rho, eu, ev, shared, table_u, table_v)
            if q[k] < F:
                high = omega
            else:
                low = omega
            here = logistic(omega)
            reached = math.inf
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


@compiled
def _logit_product(a: float, b: float) -> float:
    """Logit of logistic(a) logistic(b)."""
    x, y = math.exp(-max(a, -300.0)), math.exp(-max(b, -300.0))
    return -math.log(max(x + y + x * y, 1e-300))


@compiled
def _pair_cdf(
    omega: float,
    mu: float,
    su: float,
    mv: float,
    sv: float,
    rho: float,
    eu: float,
    ev: float,
    shared: float,
    table_u: Array,
    table_v: Array,
) -> tuple[float, float]:
    """P(logit W <= omega) and its derivative; the curve lives in p = T(u), r = T(v)."""
    R = math.exp(-omega)  # 1 / w - 1; the curve is x + y + x y = R with x = exp(-p), y = exp(-r)
    w = logistic(omega)
    beta = rho * sv / su
    sc = sv * math.sqrt(1.0 - rho * rho)
    # Ends of the curve that matter, in t = p - r, rising with u and falling with v.
    p, _ = from_table(mu + _REACH * su, eu, table_u, False)
    x = math.exp(-p)
    if x >= R:
        return 1.0, 0.0
    t_hi = p - math.log((1.0 + x) / (R - x))
    t_lo = -600.0
    p, _ = from_table(mu - _REACH * su, eu, table_u, False)
    x = math.exp(-p)
    if x < R:
        t_lo = p - math.log((1.0 + x) / (R - x))
    r, _ = from_table(mv + _REACH * sv + abs(shared), ev, table_v, False)
    y = math.exp(-r)
    if y >= R:
        return 1.0, 0.0
    t_lo = max(t_lo, math.log((1.0 + y) / (R - y)) - r)
    steepest_u, steepest_v = _steepest(table_u), _steepest(table_v)
    rate = _rate(t_lo, R, su, sc, beta, steepest_u, steepest_v)
    rate = max(rate, _rate(t_hi, R, su, sc, beta, steepest_u, steepest_v))
    h = min(_STEP, _STEP_SCALE / max(rate, 1e-9))
    if t_hi - t_lo < _MOST_STEPS * h and t_lo > -300.0 and t_hi < 300.0:
        return _trapezoid(t_lo, t_hi, h, R, w, mu, su, mv, sc, beta, eu, ev, shared, table_u, table_v)
    above = 0.0
    r, _ = from_table(mv - _REACH * sv - abs(shared), ev, table_v, False)
    y = math.exp(-r)
    if y < R:
        p = math.log((1.0 + y) / (R - y))
        if p - r < t_hi:
            # Beyond this v is above the curve for sure, and only u counts.
            t_hi = max(p - r, t_lo)
            above = normal_cdf((mu - from_table(p, eu, table_u, True)[0]) / su)
    density = 0.0
    t = t_lo
    s0 = _curve(t, R)[2]
    while t < t_hi:
        # The slope of u grows along t, that of v falls: look at both ends of the panel.
        bend = abs((s0 - 1.0) * steepest_v - beta * s0 * steepest_u)
        length = min(_LONGEST, t_hi - t, _PANEL / max(s0 * steepest_u / su, bend / sc, 1e-9))
        s1 = _curve(t + length, R)[2]
        bend = max(bend, abs((s1 - 1.0) * steepest_v - beta * s1 * steepest_u))
        shorter = _PANEL / max(s1 * steepest_u / su, bend / sc, 1e-9)
        if shorter < length:
            length = shorter
            s1 = _curve(t + length, R)[2]
        for k in range(_NODES.size):
            tt = t + 0.5 * length * (1.0 + _NODES[k])
            e, x, dp = _curve(tt, R)
            p = -math.log(x)
            u, du = from_table(p, eu, table_u, True)
            v, dv = from_table(p - tt, ev, table_v, True)
            if shared != 0.0:
                # d ln(mean of the first factor) / du = (1 - A) dT/du, and 1 - A = x / (1 + x).
                v -= shared * x / (1.0 + x) / du
            du *= dp
            g = (v - mv - beta * (u - mu)) / sc
            weight = 0.5 * length * _NODE_WEIGHTS[k] * du * normal_pdf((u - mu) / su) / su
            height = normal_pdf(g)
            above += weight * upper_tail(g, height)
            density += weight * height * dv * (1.0 - w) * (1.0 + (e / x if tt > 0.0 else 1.0 / (e * x))) / sc
        t += length
        s0 = s1
    return 1.0 - above, density


@compiled
def _rate(t: float, R: float, su: float, sc: float, beta: float, steepest_u: float, steepest_v: float) -> float:
    """How fast the standard normals that u and v stand for move along the curve."""
    s = _curve(t, R)[2]
    return math.hypot(s * steepest_u / su, ((s - 1.0) * steepest_v - beta * s * steepest_u) / sc)


@compiled
def _trapezoid(
    t_lo: float,
    t_hi: float,
    h: float,
    R: float,
    w: float,
    mu: float,
    su: float,
    mv: float,
    sc: float,
    beta: float,
    eu: float,
    ev: float,
    shared: float,
    table_u: Array,
    table_v: Array,
) -> tuple[float, float]:
    """P(logit W <= omega) and its derivative by equal steps in t; the integrand has died away at both ends."""
    above = 0.0
    density = 0.0
    ratio = math.exp(h)
    t = t_lo
    e = math.exp(t_lo)
    while t <= t_hi:
        root = (1.0 + e) + math.sqrt((1.0 + e) ** 2 + 4.0 * R * e)
        x = 2.0 * R / root
        p = -math.log(x)
        u, du = from_table(p, eu, table_u, True)
        v, dv = from_table(p - t, ev, table_v, True)
        if shared != 0.0:
            # d ln(mean of the first factor) / du = (1 - A) dT/du, and 1 - A = x / (1 + x).
            v -= shared * x / (1.0 + x) / du
        z = (u - mu) / su
        g = (v - mv - beta * (u - mu)) / sc
        weight = du * e * (x + 1.0) / (2.0 * e * x + 1.0 + e) * normal_pdf(z)
        height = normal_pdf(g)
        above += weight * upper_tail(g, height)
        density += weight * height * dv * (1.0 + 1.0 / (e * x))
        t += h
        e *= ratio
    return 1.0 - above * h / su, density * (1.0 - w) * h / (su * sc)


@compiled
def _steepest(table: Array) -> float:
    """Largest slope of the inverse of T."""
    return 1.0 / table[:, 2].min() if table.shape[0] else 1.0


@compiled
def _curve(t: float, R: float) -> tuple[float, float, float]:
    """exp(-|t|), x = exp(-p) and dp / dt on the curve x + y + x y = R with y = x exp(t); no overflow."""
    e = math.exp(-abs(t))
    root = (1.0 + e) + math.sqrt((1.0 + e) ** 2 + 4.0 * R * e)
    if t > 0.0:
        x = 2.0 * R * e / root
        return e, x, (x + 1.0) / (2.0 * x + e + 1.0)
    x = 2.0 * R / root
    return e, x, e * (x + 1.0) / (2.0 * e * x + 1.0 + e)


@compiled
def path_quantiles(
    m: Array, sign: float, factor: Array, inside: Array, table: Array, q: Array, draws: Array, out: Array
) -> None:
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
                    edge, _ = from_table(math.log(w / (products[k] - w)), sign, table, True)
                    F += normal_cdf((edge - centres[k]) / spread)
            if q[level] * count < F:
                high = w
            else:
                low = w
        out[level] = 0.5 * (low + high)
