"""Zeros as censored values: somewhere below the limit, as far below as the neighbours say.

A coordinate with one side below the limit is only known to lie beyond a bound. Given a prediction from the neighbours it
becomes a pseudo-observation (value and noise variance) that, combined with that prediction, gives the mean and
variance of the truncated normal (expectation propagation, Minka 2001). The caller predicts each such station without
itself, calls `censored_site`, and repeats a few times.

References
----------
Minka, T.P. (2001). Expectation propagation for approximate Bayesian inference. Uncertainty in Artificial
Intelligence 17, 362-369.
"""

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.composition.logratio import LogRatio
from texture.errors import CompositionError

__all__ = ["censored_site", "censoring_bounds", "truncated_moments"]


def censoring_bounds(logratio: LogRatio, fractions: npt.ArrayLike) -> tuple[Array, Array]:
    """Bounds of each coordinate where a side of its split is below the detection limit.

    Parameters
    ----------
    logratio : LogRatio
        Of kind ``tree`` or ``alr``, whose coordinates compare two sides.
    fractions : array-like, shape (n, D)
        As for `LogRatio.forward`.

    Returns
    -------
    low, high : float arrays, shape (n, d)
        The coordinate lies between; -inf and inf where open. Coordinates that are known exactly have low = high, unknown
        ones NaN twice.

    Examples
    --------
    >>> lr = LogRatio(["mud", "sand", "gravel"], detection_limit=0.01)
    >>> low, high = censoring_bounds(lr, [[0.5, 0.5, 0.0]])
    >>> low, high.round(3)
    (array([[  0., -inf]]), array([[ 0.   , -3.892]]))
    """
    if logratio.kind not in ("tree", "alr"):
        raise CompositionError(f"censoring works with kind 'tree' and 'alr', not with {logratio.kind!r}")
    limit = logratio.detection_limit
    if limit == 0:
        raise CompositionError("detection_limit = 0 censors nothing, expected a limit above zero")
    low, high = logratio.forward(fractions), logratio.forward(fractions)
    for i, (top, bottom) in enumerate(logratio.side_totals(fractions)):
        known = ~np.isnan(low[:, i])
        small_top, small_bottom = known & (top < limit), known & (bottom < limit)
        # At the bound the small side is the limit itself, and the sum of the two is kept.
        edge = np.log((top + bottom - limit)[small_top] / limit)
        low[small_top, i], high[small_top, i] = -np.inf, -edge
        edge = np.log((top + bottom - limit)[small_bottom] / limit)
        low[small_bottom, i], high[small_bottom, i] = edge, np.inf
    return low, high


def truncated_moments(
    mean: npt.ArrayLike, variance: npt.ArrayLike, low: npt.ArrayLike, high: npt.ArrayLike
) -> tuple[Array, Array]:
    """Mean and variance of a normal that is known to lie below, or above, a bound; arrays broadcast.

    Parameters
    ----------
    mean, variance : array-like
    low, high : array-like
        One of each pair is infinite.

    Raises
    ------
    CompositionError
        For variances that are not above zero, or two finite bounds.
    """
    # SciPy's special functions: only where zeros are censored.
    from scipy.special import log_ndtr

    m, v, lo, hi = np.broadcast_arrays(*(np.asarray(x, dtype=np.float64) for x in (mean, variance, low, high)))
    below, above = np.isneginf(lo) & np.isfinite(hi), np.isposinf(hi) & np.isfinite(lo)
    if (v <= 0).any() or not (below | above).all():
        raise CompositionError("truncated normal: expected variances above zero, and one bound finite, one infinite")
    sd = np.sqrt(v)
    # Turned so that the normal lies below the bound, z standard deviations from its mean.
    side = np.where(below, 1.0, -1.0)
    z = side * (np.where(below, hi, lo) - m) / sd
    # Density over probability, in logarithms: both vanish in the tail, their ratio does not.
    ratio = np.exp(-0.5 * z * z - 0.5 * np.log(2 * np.pi) - log_ndtr(z))
    # Far in the tail 1 - z r - r² loses its digits; its series in u = 1 / z² is there right to 1e-6 (held to 60 digits).
    u = 1.0 / np.maximum(z * z, 1.0)
    series = u * (1.0 + u * (-6.0 + u * (50.0 - 518.0 * u)))
    shrink = np.where(z < -30.0, series, 1.0 - z * ratio - ratio * ratio)
    return m - side * sd * ratio, v * shrink


def censored_site(
    mean: npt.ArrayLike, variance: npt.ArrayLike, low: npt.ArrayLike, high: npt.ArrayLike
) -> tuple[Array, Array]:
    """The pseudo-observation that a bound amounts to, given what the neighbours predict.

    Parameters
    ----------
    mean, variance : array-like
        Prediction of the coordinate without this station.
    low, high : array-like
        From `censoring_bounds`.

    Returns
    -------
    value, noise_variance : float arrays
        Combined with the prediction they give the truncated normal's mean and variance. NaN where the bound tells nothing
        that the neighbours did not know (it removes less than a thousandth of the variance).
    """
    m, v = np.asarray(mean, dtype=np.float64), np.asarray(variance, dtype=np.float64)
    new_mean, new_variance = truncated_moments(m, v, low, high)
    informed = new_variance < 0.999 * v
    precision = np.where(informed, 1.0 / np.where(informed, new_variance, 1.0) - 1.0 / v, 1.0)
    noise = 1.0 / precision
    value = noise * (new_mean / np.where(informed, new_variance, 1.0) - m / v)
    return np.where(informed, value, np.nan), np.where(informed, noise, np.nan)
