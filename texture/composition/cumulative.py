"""The cumulative grain-size curve as arrays: checked limits, interpolation in phi, parts of many samples at once."""

from collections.abc import Callable, Sequence
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.composition.sizes import MUD_SAND_M, SAND_GRAVEL_M, m_from_phi, phi_from_m
from texture.errors import CompositionError

__all__ = [
    "SAME_SIZE",
    "Between",
    "check_curve",
    "coarser_at",
    "interpolator",
    "parts_from_weights",
    "percentiles_from_weights",
]

Between = Literal["monotone", "linear"]
SAME_SIZE = 1e-9
"""Phi within which a size is on a limit."""
LEVEL = 1e-12
"""Cumulative fractions closer than this are one: sums of class weights differ by less."""
HALVINGS = 60  # of the step between two limits: to the last bit


def parts_from_weights(
    limits_phi: npt.ArrayLike,
    weights: npt.ArrayLike,
    cuts_m: Sequence[float] = (MUD_SAND_M, SAND_GRAVEL_M),
    between: Between = "monotone",
) -> Array:
    """Fractions between cut sizes for many samples sieved alike.

    Parameters
    ----------
    limits_phi : array-like, shape (k + 1,)
        As for `SizeCurve`.
    weights : array-like, shape (n, k)
        A row with a NaN, or of zeros, gives a NaN row.
    cuts_m : sequence of float
        Rising diameters in metres. A cut inside an open end is refused unless nothing lies in that end.
    between : {"monotone", "linear"}

    Returns
    -------
    fractions : float array, shape (n, len(cuts_m) + 1)
        Finest first; rows sum to 1.
    """
    phi, coarser, unknown = _many_curves(limits_phi, weights, between)
    cuts = phi_from_m(cuts_m)
    if cuts.ndim != 1 or not (np.diff(cuts) < 0).all():
        raise CompositionError(f"cuts_m = {list(cuts_m)}, expected rising diameters")
    at_cuts = coarser_at(phi, coarser.T, cuts, between).T
    edges = np.concatenate([np.ones((len(coarser), 1)), at_cuts, np.zeros((len(coarser), 1))], axis=1)
    fractions = np.maximum(-np.diff(edges, axis=1), 0.0)
    fractions[unknown] = np.nan
    return fractions


def percentiles_from_weights(
    limits_phi: npt.ArrayLike, weights: npt.ArrayLike, percent: float, between: Between = "monotone"
) -> Array:
    """Phi at which `percent` of each sample is coarser, for many samples sieved alike.

    Parameters
    ----------
    limits_phi, weights, between
        As for `parts_from_weights`.
    percent : float
        50 for the median.

    Returns
    -------
    phi : float array, shape (n,)
        As `SizeCurve.percentile_phi` has it; NaN where the percentile lies in an open end, which nobody measured.

    Examples
    --------
    >>> percentiles_from_weights([-1.0, 1.0, 3.0], [[50.0, 50.0], [0.0, 100.0]], 50.0, "linear").round(6)
    array([1., 2.])
    """
    if not 0.0 <= percent <= 100.0:
        raise CompositionError(f"percentile {percent:g}, expected 0 to 100")
    level = percent / 100.0
    phi, coarser, unknown = _many_curves(limits_phi, weights, between)
    outside = unknown | (level < coarser[:, 0] - LEVEL) | (level > coarser[:, -1] + LEVEL)
    first = np.argmax(coarser >= level - LEVEL, axis=1)  # the limit at or after which it is reached
    last = len(phi) - 1 - np.argmax(coarser[:, ::-1] <= level + LEVEL, axis=1)
    found = 0.5 * (phi[first] + phi[last])  # on one or more limits: their middle
    inside = np.flatnonzero(~outside & (first > last))
    j = last[inside]
    found[inside] = phi[j] + _reached(phi, coarser, inside, j, level, between)
    return np.where(outside, np.nan, found)


def _reached(
    phi: Array, coarser: Array, rows: npt.NDArray[np.intp], j: npt.NDArray[np.intp], level: float, between: str
) -> Array:
    """How far behind limit j each of some samples reaches a level that lies between this limit and the next."""
    step = phi[j + 1] - phi[j]
    run: Any = interpolator(phi, coarser.T, between)
    if not hasattr(run, "x"):  # straight between limits
        return np.asarray(step * (level - coarser[rows, j]) / (coarser[rows, j + 1] - coarser[rows, j]))
    cubic = run.c[:, j, rows]  # falling powers of the distance from limit j
    low, high = np.zeros(len(rows)), step
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        short = ((cubic[0] * middle + cubic[1]) * middle + cubic[2]) * middle + cubic[3] < level
        low, high = np.where(short, middle, low), np.where(short, high, middle)
    return np.asarray(0.5 * (low + high))


def _many_curves(
    limits_phi: npt.ArrayLike, weights: npt.ArrayLike, between: str
) -> tuple[Array, Array, npt.NDArray[np.bool_]]:
    """Finite limits (m,), the fraction of each sample coarser than them (n, m), and samples of which nothing is known."""
    amounts = np.array(weights, dtype=np.float64)
    if amounts.ndim != 2:
        raise CompositionError(f"weights have shape {amounts.shape}, expected one row for each sample")
    unknown = np.isnan(amounts).any(axis=1) | (np.nansum(amounts, axis=1) == 0)
    limits, amounts = check_curve(
        np.array(limits_phi, dtype=np.float64), np.where(unknown[:, None], 1.0, amounts), between
    )
    coarser = np.cumsum(amounts, axis=1) / amounts.sum(axis=1, keepdims=True)
    coarser = np.concatenate([np.zeros((len(amounts), 1)), coarser], axis=1)
    coarser[:, -1] = 1.0
    finite = np.isfinite(limits)
    return limits[finite], coarser[:, finite], np.asarray(unknown)


def check_curve(limits: Array, weights: Array, between: str) -> tuple[Array, Array]:
    """Limits made to rise, weights with them."""
    if between not in ("monotone", "linear"):
        raise CompositionError(f"between = {between!r}, expected 'monotone' or 'linear'")
    if limits.ndim != 1 or weights.shape[-1:] != (len(limits) - 1,) or len(limits) < 2:
        raise CompositionError(
            f"size curve: {limits.shape} limits and {weights.shape} weights, expected one limit more than weights"
        )
    steps = np.diff(limits)
    if not ((steps > 0).all() or (steps < 0).all()) or not np.isfinite(limits[1:-1]).all():
        raise CompositionError(f"size curve: limits {limits.tolist()} phi, expected rising or falling without repeats")
    if np.isfinite(limits).sum() < 2:
        raise CompositionError(f"size curve: limits {limits.tolist()} phi, expected at least two that are finite")
    if not (np.isfinite(weights).all() and (weights >= 0).all()):
        raise CompositionError("size curve: a weight is negative, infinite or missing, expected zero or more")
    if steps[0] < 0:
        limits, weights = limits[::-1].copy(), weights[..., ::-1].copy()
    return limits, weights


def coarser_at(phi: Array, coarser: Array, at: Array, between: str) -> Array:
    """Fraction coarser at phi values; `coarser` has shape (k,) or (k, n), and the answer (*at.shape,) or (*at.shape, n)."""
    inside = np.clip(at, phi[0], phi[-1])
    # A size on a limit, written in other units, is that limit.
    nearest = phi[np.argmin(np.abs(phi - inside[..., None]), axis=-1)]
    inside = np.where(np.abs(inside - nearest) < SAME_SIZE, nearest, inside)
    for beyond, open_end in (
        (at < phi[0] - SAME_SIZE, (coarser[0] > 0).any()),
        (at > phi[-1] + SAME_SIZE, (coarser[-1] < 1).any()),
    ):
        if open_end and beyond.any():
            raise CompositionError(
                f"{1e3 * float(m_from_phi(at[beyond].flat[0])):.6g} mm lies in the open end of the curve: measured is "
                f"{1e3 * float(m_from_phi(phi[-1])):.4g} to {1e3 * float(m_from_phi(phi[0])):.4g} mm"
            )
    return interpolator(phi, coarser, between)(inside)


def interpolator(phi: Array, coarser: Array, between: str) -> Callable[[Array], Array]:
    """Fraction coarser as a function of phi, between the limits."""
    # SciPy's interpolation takes a fifth of a second to import: only where curves are used.
    from scipy.interpolate import PchipInterpolator, make_interp_spline

    if between == "linear" or len(phi) == 2:
        return make_interp_spline(phi, coarser, k=1)  # type: ignore[no-any-return]
    return PchipInterpolator(phi, coarser, axis=0)  # type: ignore[no-any-return]
