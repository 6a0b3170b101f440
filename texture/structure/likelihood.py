"""Restricted likelihood of one column's covariance parameters, dense: every station against every other."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from texture.structure.models import model_code, scale_factor

__all__ = ["DenseLikelihood", "Family", "Parameters"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Family:
    """A correlation model that a fit may choose."""

    model: str
    smoothness: float | None = None

    @property
    def name(self) -> str:
        """Name for lists: "exponential", "matern 1.5"."""
        return self.model if self.smoothness is None else f"{self.model} {self.smoothness:g}"

    def packed(self, range_m: float, sill: float = 1.0) -> Array:
        """One structure of this family for compiled code, as `Covariance.packed`."""
        inverse_scale = scale_factor(self.model, self.smoothness) / range_m
        return np.array([[model_code(self.model, self.smoothness), sill, inverse_scale, self.smoothness or 0.0]])

    def correlation(self, distance: Array, range_m: float) -> Array:
        """Correlation at a C-ordered 2-D array of distances."""
        from texture.structure.compiled import covariance_matrix

        result: Array = covariance_matrix(self.packed(range_m), 0.0, distance)
        return result

    def by_log_range(self, distance: Array, range_m: float, correlation: Array) -> Array | None:
        """Derivative of the correlation by log range where it has a short form, else None.

        With x = distance over the model's own length: x exp(-x) for the exponential, x² exp(-x) for Matérn 3/2.
        """
        x = distance * (scale_factor(self.model, self.smoothness) / range_m)
        if self.model == "exponential":
            return np.asarray(x * correlation)
        if self.model == "matern" and self.smoothness == 1.5:
            return np.asarray(x * x / (1.0 + x) * correlation)
        return None


_NONE = np.empty((0, 0))


@dataclass(frozen=True)
class Parameters:
    """What is fitted for one column, in natural units; `range_m` 0 and `sill` 0 mean no structure.

    `own_ranges` are the ranges of the coordinates that have their own, in those coordinates' units.
    """

    range_m: float
    sill: float
    small_scale: float
    survey: float = 0.0
    own_ranges: tuple[float, ...] = ()

    def moved(self, place: int, by: float) -> Parameters:
        """The same with the log of one of them changed: range, sill, small-scale, survey, then own ranges."""
        if place >= 4:
            own = list(self.own_ranges)
            own[place - 4] *= float(np.exp(by))
            return replace(self, own_ranges=tuple(own))
        name = ("range_m", "sill", "small_scale", "survey")[place]
        return replace(self, **{name: getattr(self, name) * float(np.exp(by))})

    def stretched(self, points: Array, axes: tuple[int, ...]) -> Array:
        """Points with the coordinates `axes` multiplied by range over own range."""
        if not axes:
            return points
        scaled = points.copy()
        for axis, own in zip(axes, self.own_ranges, strict=True):
            scaled[:, axis] *= self.range_m / own
        return scaled


class DenseLikelihood:
    """Restricted log-likelihood and its gradient for one column of values (Patterson & Thompson 1971).

    Parameters
    ----------
    points : float array, shape (n, d)
    values : float array, shape (n,)
    noise_variance : float array, shape (n,)
        Known variance of each value; the fitted remainder is small-scale variation.
    drift : float array, shape (n, p)
        Drift columns, the constant among them.
    survey : int array, shape (n,), optional
        Survey of each station; its offset is a random effect.
    axes : tuple of int
        Coordinates that have their own range.
    """

    def __init__(
        self,
        points: Array,
        values: Array,
        noise_variance: Array,
        drift: Array,
        survey: NDArray[np.int64] | None,
        axes: tuple[int, ...] = (),
    ) -> None:
        self.points, self.axes = points, axes
        self.values, self.noise_variance, self.drift = values, noise_variance, drift
        self._distance: Array | None = None
        self.same = None if survey is None else (survey[:, None] == survey[None, :]).astype(np.float64)
        self.evaluations = 0
        self.mean_weight = 1.0

    def _distances(self, parameters: Parameters) -> Array:
        from texture.structure.compiled import distance_matrix

        if self.axes or self._distance is None:
            points = parameters.stretched(self.points, self.axes)
            self._distance = distance_matrix(points, points)
        return self._distance

    def __call__(self, family: Family | None, parameters: Parameters, gradient: bool = True) -> tuple[float, Array]:
        """Negative restricted log-likelihood and its gradient.

        The gradient is by log range, log sill, log small-scale, log survey and the logs of own ranges. The range alone
        moves the scale of the plane: own ranges stay. A matrix that cannot be factored gives infinity and a zero gradient.
        """
        from scipy.linalg import cho_factor, cho_solve
        from scipy.linalg.lapack import dpotri

        self.evaluations += 1
        n, p = self.drift.shape
        k = np.zeros((n, n))
        if family is not None:
            distance = self._distances(parameters)
            rho = family.correlation(distance, parameters.range_m)
            k += parameters.sill * rho
        if self.same is not None:
            k += parameters.survey * self.same
        k[np.diag_indices(n)] += parameters.small_scale + self.noise_variance
        try:
            factor = cho_factor(k, lower=True, overwrite_a=True, check_finite=False)
        except np.linalg.LinAlgError:
            return np.inf, np.zeros(4 + len(self.axes))
        solved = cho_solve(factor, np.column_stack([self.drift, self.values]), check_finite=False)
        by_drift, by_values = solved[:, :p], solved[:, p]
        information = self.drift.T @ by_drift
        sign, log_information = np.linalg.slogdet(information)
        if sign <= 0:
            return np.inf, np.zeros(4 + len(self.axes))
        coefficients = np.linalg.solve(information, self.drift.T @ by_values)
        projected = by_values - by_drift @ coefficients
        log_determinant = 2.0 * np.log(np.diag(factor[0])).sum()
        quadratic = float(self.values @ projected)
        loss = 0.5 * (log_determinant + log_information + quadratic + (n - p) * np.log(2.0 * np.pi))
        if not gradient:
            return float(loss), np.zeros(4 + len(self.axes))
        from texture.structure.compiled import trace_products

        inverse = dpotri(factor[0], lower=1, overwrite_c=1)[0]
        right = np.linalg.solve(information, by_drift.T).T

        def traces(*matrices: Array | None) -> tuple[float, float, float, float]:
            # d loss / d theta = 1/2 trace of (P - Pz (Pz)') dK/d theta, P the inverse without the drift's part
            of = [_NONE if m is None else m for m in matrices]
            return trace_products(inverse, by_drift, right, projected, *of)

        slope = np.zeros(4 + len(self.axes))
        by_range = None if family is None or self.axes else family.by_log_range(distance, parameters.range_m, rho)
        a, b, c, unity = traces(by_range, rho if family is not None else None, self.same)
        slope[:4] = parameters.sill * a, parameters.sill * b, parameters.small_scale * unity, parameters.survey * c
        if family is not None and by_range is None:
            step = 1e-4  # central difference in log range: its error, 1e-8 relative, is below the optimiser's
            for place in (0, *range(4, len(slope))):
                near, far = parameters.moved(place, step), parameters.moved(place, -step)
                up = family.correlation(self._distances(near), near.range_m)
                down = family.correlation(self._distances(far), far.range_m)
                slope[place] = parameters.sill * traces(up - down, None, None)[0] / (2.0 * step)
        return float(loss), 0.5 * slope
