"""Ranges that differ with direction: given, or found by likelihood in the plane.

A direction and a ratio are searched for as two numbers u = ln(ratio) (cos 2a, sin 2a), a the azimuth: they are smooth
through "no anisotropy" (u = 0), where azimuth means nothing. Points are turned and stretched at constant area, so that the range, now the
geometric mean of the longer and the shorter, hardly depends on u, and structure and direction can be fitted in turn.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.structure.covariance import Covariance, CovarianceSet, Structure, check_points
from texture.structure.likelihood import DenseLikelihood, Family, Parameters
from texture.structure.record import Fit

__all__ = ["Anisotropy", "fit_with_anisotropy"]

Array = NDArray[np.float64]
Anisotropy = tuple[float, float]

MOST_DENSE = 500
"""Stations, a seeded choice of them, that the direction is found from."""
PRIOR_SPREAD = 0.7
"""Standard deviation of ln(ratio) in the prior: a ratio of 2 costs half a unit of log-likelihood, 4 costs 2."""
LEAST_GAIN = 3.0
"""Direction must raise the log-likelihood, prior included, by this much over none. Twice the gain is nearly chi-squared with two
degrees of freedom where there is no direction, so chance does it in at most one data set in twenty (the largest of 12 simulated: 2.6)."""
MOST_RATIO = 10.0
ROUNDS = 2


def fit_with_anisotropy(
    points: ArrayLike,
    values: ArrayLike,
    anisotropy: str | Anisotropy = "fit",
    start: Covariance | CovarianceSet | None = None,
    seed: int = 0,
    own_range_axes: Sequence[int] = (),
    **fit: Any,
) -> Any:
    """Fit covariances whose range depends on direction, the same direction and ratio for all columns.

    Parameters
    ----------
    points, values, start, seed, own_range_axes, **fit
        As for `texture.structure.fit.fit_covariance`; two coordinates without an own range, which are turned.
    anisotropy : "fit" or (azimuth in degrees, ratio)
        Found by likelihood, or given: clockwise from grid north to the longer axis, and longer over shorter.

    Returns
    -------
    As `fit_covariance`, with `anisotropy` set where there is some. A note in each `fit_record` says what was found.

    Raises
    ------
    StructureError
        Other than two plane coordinates, or an anisotropy that is none.
    """
    from texture.structure.fit import fit_covariance, one_blas_thread

    places, axes = check_points(points), tuple(int(a) for a in own_range_axes)
    if places.shape[1] - len(axes) != 2 or set(axes) & {0, 1}:
        raise StructureError(
            f"anisotropy: found {places.shape[1] - len(axes)} coordinates of place, expected the two of a plane first"
        )
    u = np.zeros(2)
    if anisotropy == "fit":
        first = start if isinstance(start, Covariance) or start is None else start[0]
        u = _u_of(first.anisotropy) if first is not None else u
    elif isinstance(anisotropy, str):
        raise StructureError(f'anisotropy: found "{anisotropy}", expected "fit" or (azimuth in degrees, ratio)')
    else:
        u = _u_of(Covariance([], small_scale=1.0, anisotropy=anisotropy).anisotropy)

    def fitted(u: Array, begin: Any) -> Any:
        return fit_covariance(
            _turned(places, u), values, start=_at_constant_area(begin), seed=seed, own_range_axes=axes, **fit
        )

    found = fitted(u, start)
    if anisotropy != "fit":
        return _attached(found, u, "anisotropy was given: azimuth {:.0f}°, ratio {:.2f}")
    warm = start is not None
    gain = 0.0
    with one_blas_thread():
        for _ in range(ROUNDS - warm):
            loss = _loss_of_direction(places, values, found, seed, axes, fit)
            u, gain = _search(loss, u, cold=not warm and not u.any())
            found = fitted(u, found)
    if not u.any():
        return _attached(found, u, f"no anisotropy: no direction raises the log-likelihood by {LEAST_GAIN:g}")
    note = f"longer ranges along azimuth {{:.0f}}°, by {{:.2f}}; log-likelihood raised by {gain:.1f} over none"
    return _attached(found, u, note)


def _u_of(anisotropy: Anisotropy | None) -> Array:
    if anisotropy is None:
        return np.zeros(2)
    twice = 2.0 * math.radians(anisotropy[0])
    return math.log(anisotropy[1]) * np.array([math.cos(twice), math.sin(twice)])


def _anisotropy_of(u: Array) -> Anisotropy | None:
    """Azimuth from 0 to 180 and ratio, rounded to six digits; None for none."""
    ratio = math.exp(float(np.linalg.norm(u)))
    if ratio < 1.0 + 1e-9:
        return None
    return float(f"{math.degrees(0.5 * math.atan2(u[1], u[0])) % 180.0:.6g}"), float(f"{ratio:.6g}")


def _turned(points: Array, u: Array) -> Array:
    """Points turned to the longer axis and stretched at constant area."""
    anisotropy = _anisotropy_of(u)
    if anisotropy is None:
        return points
    turned = Covariance([], small_scale=1.0, anisotropy=anisotropy).metric(points)
    turned[:, :2] /= math.sqrt(anisotropy[1])
    return turned


def _scaled(covariance: Covariance, factor: float, anisotropy: Anisotropy | None, record: Fit | None) -> Covariance:
    """The same covariance with all ranges, and the metres that covariates count for, multiplied by a factor."""
    c = covariance
    structures = [Structure(s.model, s.sill, float(f"{s.range_m * factor:.6g}"), s.smoothness) for s in c.structures]
    scales = None
    if c.axis_scales is not None:
        scales = [s if j < 2 else float(f"{s * factor:.6g}") for j, s in enumerate(c.axis_scales)]
    return Covariance(structures, c.small_scale, c.noise, c.survey, anisotropy, scales, record)


def _at_constant_area(start: Any) -> Any:
    """A warm start for turned points: its range the geometric mean of longer and shorter."""
    if start is None:
        return None
    if isinstance(start, CovarianceSet):
        return CovarianceSet([_at_constant_area(c) for c in start], start.correlation)
    if start.anisotropy is None:
        return start
    return _scaled(start, 1.0 / math.sqrt(start.anisotropy[1]), None, start.fit_record)


def _attached(found: Any, u: Array, note: str) -> Any:
    from dataclasses import replace

    if isinstance(found, CovarianceSet):
        return CovarianceSet([_attached(c, u, note) for c in found], found.correlation)
    anisotropy = _anisotropy_of(u)
    told = note.format(*anisotropy) if anisotropy else note
    record = None if found.fit_record is None else replace(found.fit_record, notes=(*found.fit_record.notes, told))
    if anisotropy is None or not found.structures:
        return _scaled(found, 1.0, None, record)
    return _scaled(found, math.sqrt(anisotropy[1]), anisotropy, record)


def _loss_of_direction(
    points: Array, values: ArrayLike, found: Any, seed: int, axes: tuple[int, ...], fit: dict[str, Any]
) -> Any:
    """Negative restricted log-likelihood, prior included, by u, summed over the columns that have structure."""
    array = np.asarray(values, dtype=np.float64).reshape(len(points), -1)
    noise = (
        np.zeros(array.shape)
        if fit.get("noise_variance") is None
        else np.asarray(fit["noise_variance"], dtype=np.float64)
    )
    noise = np.broadcast_to(noise.reshape(len(points), -1), array.shape)
    labels = None if fit.get("survey") is None else np.unique(np.asarray(fit["survey"]), return_inverse=True)[1]
    columns = np.ones((len(points), 1))
    if fit.get("drift") is not None:
        drift = np.asarray(fit["drift"], dtype=np.float64).reshape(len(points), -1)
        columns = np.column_stack([columns, (drift - drift.mean(axis=0)) / np.maximum(drift.std(axis=0), 1e-300)])
    covariances = [found] if isinstance(found, Covariance) else list(found)
    parts = []
    for v, c in enumerate(covariances):
        known = np.flatnonzero(np.isfinite(array[:, v]))
        if not c.structures or known.size < 3:
            continue
        if known.size > MOST_DENSE:
            known = np.sort(np.random.default_rng(seed).choice(known, MOST_DENSE, replace=False))
        own = () if c.axis_scales is None else tuple(c.range_m / c.axis_scales[a] for a in axes)
        s = c.structures[0]
        survey = labels[known].astype(np.int64) if labels is not None and c.survey > 0.0 else None
        parts.append(
            (
                known,
                v,
                Family(s.model, s.smoothness),
                Parameters(s.range_m, s.sill, c.small_scale, c.survey, own),
                survey,
            )
        )

    def loss(u: Array) -> float:
        total = 0.5 * float(u @ u) / PRIOR_SPREAD**2
        if float(np.linalg.norm(u)) > math.log(MOST_RATIO):
            return np.inf
        for known, v, family, parameters, survey in parts:
            likelihood = DenseLikelihood(
                np.ascontiguousarray(_turned(points[known], u)), array[known, v], noise[known, v], columns[known], survey,
                axes if parameters.own_ranges else (),
            )  # fmt: skip
            total += likelihood(family, parameters, gradient=False)[0]
        return total

    return loss


def _search(loss: Any, u: Array, cold: bool) -> tuple[Array, float]:
    """The best u near a first guess, or near the best of six directions; none where it gains too little over none."""
    from scipy.optimize import minimize

    none = loss(np.zeros(2))
    if not math.isfinite(none):
        return np.zeros(2), 0.0
    guesses = [u]
    if cold:
        around = np.arange(6) * math.pi / 3.0
        guesses = [math.log(2.0) * np.array([math.cos(a), math.sin(a)]) for a in around]
    begin = min(guesses, key=loss)
    simplex = begin + 0.15 * np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    settings = {"initial_simplex": simplex, "xatol": 0.01, "fatol": 0.01, "maxiter": 60}
    best = minimize(loss, begin, method="Nelder-Mead", options=settings)
    gain = none - float(best.fun)
    return (np.asarray(best.x), gain) if gain > LEAST_GAIN else (np.zeros(2), gain)
