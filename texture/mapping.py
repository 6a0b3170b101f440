"""One method fitted on some stations: from points in the plane to a normal in log-ratio coordinates.

The map and its validation both come through here, so that what is validated is what is mapped.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.observations import Observations
from texture.recipe import Method

if TYPE_CHECKING:
    from texture.composition import LogRatio
    from texture.structure import CovarianceSet

__all__ = ["Mapper", "fit_structure", "make_mapper"]

Floats = NDArray[np.float64]
LEAST_TRACE = (
    0.01  # gravel below it names no class of the map; some mapping practice takes this (common practice, no source)
)


def fit_structure(observations: Observations, method: Method, start: CovarianceSet | None = None) -> CovarianceSet:
    """Fit the spatial structure of all coordinates; `start` makes it a warm start (inside folds)."""
    from texture.structure import Covariance

    several = np.unique(observations.survey).size > 1
    fitted: CovarianceSet = Covariance.fit(
        observations.points,
        observations.coordinates,
        method=method.fit,
        noise_variance=observations.noise,
        survey=observations.survey if several else None,
        start=start,
    )
    return fitted


@dataclass(frozen=True, eq=False)
class Mapper:
    """A fitted method together with the coordinates that it works in."""

    name: str
    logratio: LogRatio
    structure: CovarianceSet
    predictor: Any

    @property
    def has_variance(self) -> bool:
        """Tell whether the method says how uncertain it is."""
        from texture.predict import METHODS

        return METHODS[self.name].has_variance

    @property
    def small_scale(self) -> Floats:
        """Variance of the bed's own patchiness in each coordinate, shape (d,)."""
        return np.array([c.small_scale for c in self.structure])

    def predict(self, points: Floats) -> tuple[Floats, Floats]:
        """Mean and variance of the bed at points, shapes (n, d); variance NaN where the method has none."""
        mean, variance = self.predictor.predict(points)
        return mean, variance

    def predict_with_rung(self, points: Floats) -> tuple[Floats, Floats, NDArray[np.int8]]:
        """Mean, variance, and per point how far the neighbourhood had to look: 0 the usual one, above it wider."""
        if not self.has_variance:
            mean, variance = self.predict(points)
            return mean, variance, np.zeros(len(points), dtype=np.int8)
        mean, variance, rung = self.predictor.predict_with_support(points)
        return mean, variance, rung.max(axis=1)

    def sample_variance(self, variance: Floats, noise: Floats) -> Floats:
        """Variance of a new sample: of the bed, of its analysis (per row) and of its survey's offset."""
        return np.asarray(variance + noise + np.array([c.noise + c.survey for c in self.structure]))

    def covariance(self, variance: Floats) -> Floats:
        """Covariance of the coordinates from their variances, shape (n, d, d), by the residual correlation."""
        sd = np.sqrt(variance)
        return np.asarray(sd[:, :, None] * sd[:, None, :] * self.structure.correlation)

    def expected(self, mean: Floats, variance: Floats) -> Floats:
        """Expected fractions, shape (n, parts); the plain back-transform where the method has no variance."""
        if not self.has_variance:
            return self.logratio.inverse(mean)
        return self.logratio.expected(mean, self.covariance(variance))

    def interval(self, mean: Floats, variance: Floats, levels: tuple[float, float] = (0.05, 0.95)) -> Floats:
        """Quantiles of each part, shape (2, n, parts); NaN where the method has no variance."""
        if not self.has_variance:
            return np.full((2, mean.shape[0], self.logratio.n_parts), np.nan)
        return self.logratio.quantiles(mean, self.covariance(variance), levels)

    def cell_quantiles(self, mean: Floats, variance: Floats, levels: tuple[float, ...]) -> Floats:
        """Quantiles of the mean of a cell, shape (q, n, parts): small-scale variation averages out inside it.

        In coordinates without shares (ilr, alr) there is no such form: it is then left out of the variance.
        """
        if not self.has_variance:
            return np.full((len(levels), mean.shape[0], self.logratio.n_parts), np.nan)
        within = np.minimum(variance, self.small_scale)
        if not self.logratio.amalgamates:
            return self.logratio.quantiles(mean, self.covariance(variance - within), levels)
        return self.logratio.quantiles(mean, self.covariance(variance), levels, within=within)

    def likely_class(self, mean: Floats, variance: Floats) -> tuple[NDArray[np.int8], Floats]:
        """Most probable texture class of the bed at points, numbered from 1, and its probability."""
        from texture.composition import class_odds

        spread = self.covariance(variance) if self.has_variance else np.zeros_like(mean)
        odds = class_odds(self.logratio, mean, spread, "folk", trace=max(LEAST_TRACE, self.logratio.detection_limit))
        return odds.number, odds.probability


def make_mapper(
    name: str, observations: Observations, structure: CovarianceSet, method: Method, logratio: LogRatio
) -> Mapper:
    """Fit one method on stations."""
    from texture.predict import make_method

    settings = {"neighbours": method.neighbours, "neighbourhood": method.neighbourhood} if name == "kriging" else {}
    predictor = make_method(name, structure, **settings)
    several = np.unique(observations.survey).size > 1
    predictor.fit(
        observations.points,
        observations.coordinates,
        noise_variance=observations.noise,
        survey=observations.survey if several else None,
    )
    return Mapper(name, logratio, structure, predictor)
