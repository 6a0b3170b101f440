"""The cumulative grain-size curve as arrays: checked limits, interpolation in phi, parts of many samples at once."""

from collections.abc import Callable, Sequence
from typing import Literal

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.composition.sizes import MUD_SAND_M, SAND_GRAVEL_M, m_from_phi, phi_from_m
from texture.errors import CompositionError

__all__ = ["SAME_SIZE", "Between", "check_curve", "coarser_at", "interpolator", "parts_from_weights"]

Between = Literal["monotone", "linear"]
SAME_SIZE = 1e-9
"""Phi within which a size is on a limit."""


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
    amounts = np.array(weights, dtype=np.float64)
    if amounts.ndim != 2:
        raise CompositionError(f"weights have shape {amounts.shape}, expected one row for each sample")
    unknown = np.isnan(amounts).any(axis=1) | (np.nansum(amounts, axis=1) == 0)
    limits, amounts = check_curve(
        np.array(limits_phi, dtype=np.float64), np.where(unknown[:, None], 1.0, amounts), between
    )
    cuts = phi_from_m(cuts_m)
    if cuts.ndim != 1 or not (np.diff(cuts) < 0).all():
        raise CompositionError(f"cuts_m = {list(cuts_m)}, expected rising diameters")
    coarser = np.cumsum(amounts, axis=1) / amounts.sum(axis=1, keepdims=True)
    coarser = np.concatenate([np.zeros((len(amounts), 1)), coarser], axis=1)
    coarser[:, -1] = 1.0
    finite = np.isfinite(limits)
    at_cuts = coarser_at(limits[finite], coarser[:, finite].T, cuts, between).T
    edges = np.concatenate([np.ones((len(amounts), 1)), at_cuts, np.zeros((len(amounts), 1))], axis=1)
    fractions = np.maximum(-np.diff(edges, axis=1), 0.0)
    fractions[unknown] = np.nan
    return fractions


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
