"""Rows that are not exact, as pseudo-observations of log-ratio coordinates.

``<1``, ``>95``, ``5-10``, a median size, mud against sand only, sand only: each says where the fractions may lie. The row is
spread evenly over that place by a fixed set of quasi-random points, each point goes through `LogRatio.forward` like
an exact row would, and the mean and variance of what comes out are the pseudo-observation and its noise variance
(moment matching). Words are in `texture.composition.words`; rounded numbers in `LogRatio.forward_with_noise`.

A coordinate about which the row says nothing is NaN, not a wide guess: one that is spread about as widely as
in a row of which nothing at all is known (for a split of the tree, a share anywhere between 0 and 1, variance π² / 3).
"""

from dataclasses import replace
from functools import cache

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.composition.logratio import LogRatio
from texture.composition.sizes import MUD_SAND_M, SAND_GRAVEL_M, phi_from_m
from texture.errors import CompositionError

__all__ = ["SORTING_PHI", "from_intervals", "from_median", "from_mud_and_sand"]

POINTS = 256
"""Points a row is spread over. Against 2**16 points, over nine kinds of row and detection limits of 0.005 and 1e-9, the mean of
a coordinate moved by at most 0.005 and its standard deviation by at most 2.4 %."""
UNINFORMED = 0.8
"""Share of the variance of no knowledge from which a coordinate counts as unknown."""
SORTING_PHI = (0.4, 2.5)
"""Sorting of samples of which only the median is known: anything from well to very poorly sorted, evenly in its logarithm.
An assumption; Folk & Ward (1957) call 0.35 to 0.5 phi well sorted and 2 to 4 very poorly."""
MEDIAN_VARIANCE = 0.25
"""Added for a median alone, since no sample is quite log-normal: half a unit of log-ratio. An assumption."""
_NO_LIMIT = 1e-12
_ROWS_AT_ONCE = 4096
_SUM_TOLERANCE = 0.02


def from_intervals(logratio: LogRatio, low: npt.ArrayLike, high: npt.ArrayLike) -> tuple[Array, Array]:
    """Pseudo-observations of rows whose parts are known to lie between limits.

    Parts are drawn one after the other, each evenly over what its own limits and those of the parts still to come
    allow, and the last takes the rest. Those that may be as little as nothing come first: ``<10`` beside 60 and 40 is
    anything below 10 evenly, and the other two make room for it. Then come the other known parts, then those of
    which nothing is known; within each of the three the narrowest interval comes first.

    Parameters
    ----------
    logratio : LogRatio
    low, high : array-like, shape (n, D)
        Limits in fractions of the whole; NaN or 0 and 1 for unknown. ``<1`` percent is 0 and 0.01, ``>95`` is
        0.95 and 1, an exact value has low = high; "sand only" is a row with only sand known.

    Returns
    -------
    mean, variance : float arrays, shape (n, d)
        NaN for coordinates that the row says nothing about.

    Raises
    ------
    CompositionError
        For limits that are out of order, outside [0, 1], or that no composition meets.

    Examples
    --------
    >>> lr = LogRatio(["mud", "sand", "gravel"])
    >>> mean, variance = from_intervals(lr, [[0.95, 0, 0]], [[1, 1, 1]])  # "> 95 % mud"
    >>> mean.round(2), variance.round(2)
    (array([[3.91,  nan]]), array([[0.69,  nan]]))
    """
    lo, hi = _limits(logratio, low, high)
    n, parts = lo.shape
    order = _drawing_order(lo, hi)
    # Without a detection limit worth the name: it clips, and clipped ignorance looks like knowledge.
    bare = replace(logratio, detection_limit=_NO_LIMIT)
    nothing = np.zeros((1, parts)), np.ones((1, parts)), np.arange(parts)[None]
    ignorance = _match(bare, _spread(*nothing))[1]
    mean, variance = np.empty((n, logratio.n_coordinates)), np.empty((n, logratio.n_coordinates))
    for start in range(0, n, _ROWS_AT_ONCE):
        rows = slice(start, start + _ROWS_AT_ONCE)
        draws = _spread(lo[rows], hi[rows], order[rows])
        silent = np.logical_not(_match(bare, draws)[1] <= UNINFORMED * ignorance)
        for out, values in zip((mean, variance), _match(logratio, draws), strict=True):
            out[rows] = np.where(silent, np.nan, values)
    return mean, variance


def _drawing_order(low: Array, high: Array) -> npt.NDArray[np.intp]:
    """Columns of each row in the order that they are drawn in, shape (n, D).

    Were the exact neighbours of ``<10`` drawn first, what they leave for it would be their two errors added up: seldom
    near 0, and of a third of the variance of a logarithm that is known by an upper limit alone.
    """
    unknown = (low <= 0.0) & (high >= 1.0)
    turn = np.where(unknown, 2, np.where(low <= 0.0, 0, 1))
    return np.lexsort((np.round(high - low, 12), turn), axis=1)


def _spread(low: Array, high: Array, order: npt.NDArray[np.intp]) -> Array:
    """Points of each row between its limits, shape (n, points, D); parts are drawn in `order`, the last takes the rest."""
    lo, hi = np.take_along_axis(low, order, axis=1), np.take_along_axis(high, order, axis=1)
    n, parts = lo.shape
    u = _points(parts - 1)
    draws = np.empty((n, POINTS, parts))
    left = np.ones((n, POINTS))
    for k in range(parts - 1):
        least = np.maximum(lo[:, k, None], left - hi[:, k + 1 :].sum(axis=1)[:, None])
        most = np.minimum(hi[:, k, None], left - lo[:, k + 1 :].sum(axis=1)[:, None])
        draws[:, :, k] = np.clip(least + np.maximum(most - least, 0.0) * u[:, k], 0.0, 1.0)
        left = left - draws[:, :, k]
    draws[:, :, -1] = np.maximum(left, 0.0)
    back = np.argsort(order, axis=1)
    return np.take_along_axis(draws, np.broadcast_to(back[:, None, :], draws.shape), axis=2)


def from_mud_and_sand(
    logratio: LogRatio,
    mud_share: npt.ArrayLike,
    gravel_logit: tuple[float, float] | None = None,
) -> tuple[Array, Array]:
    """Pseudo-observations of rows that know only mud : sand, such as a laser sheet that ends at 2 mm.

    Gravel was not seen, which is not the same as none.

    Parameters
    ----------
    logratio : LogRatio
        With the parts mud, sand, gravel.
    mud_share : array-like, shape (n,)
        Mud / (mud + sand).
    gravel_logit : (mean, variance), optional
        What is known of the gravel fraction from elsewhere, as a normal logit; any share evenly when left out.

    Returns
    -------
    mean, variance : float arrays, shape (n, d)
        The coordinate that compares mud and sand alone (with ``tree = [["mud", "sand"], "gravel"]``, or ``alr``) is known in
        full; one that compares mud with sand + gravel in part; one that only gravel decides is NaN.
    """
    if sorted(logratio.parts) != ["gravel", "mud", "sand"]:
        raise CompositionError(f"parts are {list(logratio.parts)}, expected mud, sand, gravel")
    share = np.asarray(mud_share, dtype=np.float64)
    if share.ndim != 1 or ((share < 0) | (share > 1)).any():
        raise CompositionError("mud_share: expected a list of shares from 0 to 1 (mud of mud and sand)")
    u = _points(1)[:, 0]
    if gravel_logit is None:
        gravel = u
    else:
        from scipy.special import expit, ndtri

        gravel = expit(gravel_logit[0] + np.sqrt(gravel_logit[1]) * ndtri(u))
    pieces = {
        "mud": share[:, None] * (1 - gravel),
        "sand": (1 - share)[:, None] * (1 - gravel),
        "gravel": np.broadcast_to(gravel, (len(share), len(u))),
    }
    mean, variance = _match(logratio, np.stack([pieces[p] for p in logratio.parts], axis=2))
    # Where the given gravel alone decides, the row itself says nothing: it must not be repeated as data.
    gravel_column = logratio.parts.index("gravel")
    for i, split in enumerate(logratio.splits):
        sides = (split.numerator, split.denominator)
        if (gravel_column,) in sides:
            mean[:, i] = variance[:, i] = np.nan
    return mean, variance


def from_median(
    logratio: LogRatio,
    median_phi: npt.ArrayLike,
    cuts_m: tuple[float, float] = (MUD_SAND_M, SAND_GRAVEL_M),
    sorting_phi: tuple[float, float] = SORTING_PHI,
) -> tuple[Array, Array]:
    """Pseudo-observations of rows of which only the median grain size is known.

    The sample is taken as log-normal about its median, with a sorting anywhere between two limits, and
    `MEDIAN_VARIANCE` is added. A split that does not concern the part in which the median lies stays NaN.

    Parameters
    ----------
    logratio : LogRatio
        With the parts mud, sand, gravel.
    median_phi : array-like, shape (n,)
    cuts_m : (float, float)
        Where mud and sand, and sand and gravel meet.
    sorting_phi : (float, float)

    Returns
    -------
    mean, variance : float arrays, shape (n, d)
    """
    if sorted(logratio.parts) != ["gravel", "mud", "sand"]:
        raise CompositionError(f"parts are {list(logratio.parts)}, expected mud, sand, gravel")
    from scipy.special import ndtr

    median: Array = np.asarray(median_phi, dtype=np.float64)
    if median.ndim != 1 or np.isinf(median).any():
        raise CompositionError(f"median_phi has shape {median.shape}, expected a list of finite phi values")
    least, most = np.log(sorting_phi)
    spread = np.exp(least + (most - least) * _points(1)[:, 0])
    mud_cut, gravel_cut = (float(phi_from_m(cut)) for cut in cuts_m)
    mud = ndtr((median[:, None] - mud_cut) / spread)
    gravel = ndtr((gravel_cut - median[:, None]) / spread)
    pieces = {"mud": mud, "sand": np.maximum(1 - mud - gravel, 0.0), "gravel": gravel}
    mean, variance = _match(logratio, np.stack([pieces[p] for p in logratio.parts], axis=2))
    # The median of a mud tells nothing about gravel against sand: only splits that part it from others are kept.
    home: npt.NDArray[np.str_] = np.where(median > mud_cut, "mud", np.where(median < gravel_cut, "gravel", "sand"))
    for i, split in enumerate(logratio.splits):
        named = [logratio.parts[j] for j in (*split.numerator, *split.denominator)]
        mean[np.isin(home, named, invert=True), i] = np.nan
        variance[:, i] = np.where(np.isnan(mean[:, i]), np.nan, variance[:, i] + MEDIAN_VARIANCE)
    return mean, variance


def _limits(logratio: LogRatio, low: npt.ArrayLike, high: npt.ArrayLike) -> tuple[Array, Array]:
    lo, hi = np.array(low, dtype=np.float64), np.array(high, dtype=np.float64)
    if lo.shape != hi.shape or lo.ndim != 2 or lo.shape[1] != logratio.n_parts:
        raise CompositionError(f"limits have shapes {lo.shape} and {hi.shape}, expected (n, {logratio.n_parts}) twice")
    lo, hi = np.where(np.isnan(lo), 0.0, lo), np.where(np.isnan(hi), 1.0, hi)
    wrong = ((lo < 0) | (hi > 1) | (lo > hi)).any(axis=1)
    # Rounded exact values may miss 1 by a little, as in a sheet.
    wrong |= (lo.sum(axis=1) > 1 + _SUM_TOLERANCE) | (hi.sum(axis=1) < 1 - _SUM_TOLERANCE)
    if wrong.any():
        row = int(np.argmax(wrong))
        raise CompositionError(
            f"row {row} (counted from 0): limits {lo[row].tolist()} to {hi[row].tolist()}, expected rising limits in "
            "[0, 1] that some composition of sum 1 meets"
        )
    return lo, hi


def _match(logratio: LogRatio, draws: Array) -> tuple[Array, Array]:
    """Mean and variance over points, shape (n, points, D), of each coordinate; NaN if most points leave it unknown."""
    missing = np.isnan(draws.sum(axis=(1, 2)))
    coords = logratio.forward(np.where(missing[:, None, None], 1.0, draws))
    known = ~np.isnan(coords)
    count = known.sum(axis=1)
    mean = np.where(known, coords, 0.0).sum(axis=1) / np.maximum(count, 1)
    away = np.where(known, coords - mean[:, None, :], 0.0)
    variance = (away**2).sum(axis=1) / np.maximum(count, 1)
    unknown = (count < 0.5 * draws.shape[1]) | missing[:, None]
    return np.where(unknown, np.nan, mean), np.where(unknown, np.nan, variance)


@cache
def _points(dimension: int) -> Array:
    """Points that fill the unit cube evenly, shape (POINTS, dimension): fixed scrambled Sobol points."""
    from scipy.stats import qmc

    points = np.asarray(qmc.Sobol(dimension, scramble=True, seed=20240301).random(POINTS), dtype=np.float64)
    points.flags.writeable = False
    return points
