"""One method fitted on some stations: from points in the plane to a normal in the columns of a treatment.

The map and its validation both come through here, so that what is validated is what is mapped.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.observations import Observations
from texture.recipe import Method
from texture.treatments import Censor, Treatment

if TYPE_CHECKING:
    from texture.composition import LogRatio
    from texture.structure import CovarianceSet

__all__ = ["Learned", "Mapper", "learn", "learn_all", "make_mapper"]

Floats = NDArray[np.float64]
SWEEPS = (4, 2)
"""Of censored values, before the fit and after it. On 494 stations, 203 of them without gravel, the mean change of a value fell from
0.07 in the first to 0.035 in the fourth and 0.006 in the eighth, against a noise of standard deviation 1.2."""


@dataclass(frozen=True, eq=False)
class Learned:
    """What a treatment makes of some stations, and the structure fitted to it.

    Attributes
    ----------
    treatment : Treatment
    observations : Observations
        The stations learned from.
    values, noise : float arrays, shape (n, k)
        Columns to krige and their noise variance.
    structure : CovarianceSet
    """

    treatment: Treatment
    observations: Observations
    values: Floats
    noise: Floats
    structure: CovarianceSet

    @property
    def survey(self) -> NDArray[np.int64] | None:
        """Survey of each station, None where there is but one."""
        survey = self.observations.survey
        return survey if np.unique(survey).size > 1 else None


def learn(
    treatment: Treatment, observations: Observations, method: Method, start: CovarianceSet | None = None
) -> Learned:
    """Fit the spatial structure of all columns of a treatment.

    Parameters
    ----------
    treatment : Treatment
    observations : Observations
    method : Method
        Of the recipe: how structure is fitted.
    start : CovarianceSet, optional
        A warm start (inside folds).
    """
    values, noise = treatment.columns(observations)
    if not isinstance(treatment, Censor):
        return _fitted(treatment, observations, values, noise, method, start)
    if start is None:
        start = _fitted(treatment, observations, values, noise, method, None).structure
    # Structure and censored values hang together: sweeps with one, a fit to the other, and sweeps again.
    low, high = treatment.bounds(observations)
    learned = Learned(treatment, observations, values, noise, start)
    for _ in range(SWEEPS[0]):
        values, noise = treatment.sweep(values, noise, low, high, *_without_each(learned, values, noise))
    learned = _fitted(treatment, observations, values, noise, method, start)
    for _ in range(SWEEPS[1]):
        values, noise = treatment.sweep(values, noise, low, high, *_without_each(learned, values, noise))
    values, noise = treatment.told(values, noise, low, high, *_without_each(learned, values, noise))
    return replace(learned, values=values, noise=noise)


def learn_all(tasks: Sequence[tuple[Treatment, Observations, CovarianceSet | None]], method: Method) -> list[Learned]:
    """`learn` for several treatments or sets of stations, on as many threads as compiled code uses.

    Each is a sum in one order on one thread: the same bits on any number of cores.
    """
    from concurrent.futures import ThreadPoolExecutor

    from numba import get_num_threads

    with _one_blas_thread(), ThreadPoolExecutor(min(int(get_num_threads()), max(len(tasks), 1))) as pool:
        return list(pool.map(lambda task: learn(task[0], task[1], method, task[2]), tasks))


def _one_blas_thread() -> Any:
    from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]  # ships no annotations

    return threadpool_limits(limits=1, user_api="blas")


def _fitted(
    treatment: Treatment,
    observations: Observations,
    values: Floats,
    noise: Floats,
    method: Method,
    start: CovarianceSet | None,
) -> Learned:
    from texture.structure import Covariance

    several = np.unique(observations.survey).size > 1
    structure: CovarianceSet = Covariance.fit(
        observations.points,
        values,
        method=method.fit,
        noise_variance=noise,
        survey=observations.survey if several else None,
        start=start,
    )
    return Learned(treatment, observations, values, noise, structure)


def _without_each(learned: Learned, values: Floats, noise: Floats) -> tuple[Floats, Floats]:
    """Each station predicted from all others, shapes (n, k); the variance is of its sample without its own noise."""
    from texture.predict import Kriging
    from texture.predict.leave_out import leave_out

    structure = learned.structure
    with _one_blas_thread():
        kriging = Kriging(structure).fit(
            learned.observations.points, values, noise_variance=noise, survey=learned.survey
        )
        mean, variance = leave_out(kriging)
    return mean, variance - noise - np.array([c.noise for c in structure])


@dataclass(frozen=True, eq=False)
class Mapper:
    """A fitted method together with the treatment whose columns it works in."""

    name: str
    treatment: Treatment
    structure: CovarianceSet
    predictor: Any

    @property
    def logratio(self) -> LogRatio:
        """Coordinates of the treatment."""
        return self.treatment.logratio

    @property
    def column_names(self) -> tuple[str, ...]:
        """A formula for each column that is kriged."""
        return self.treatment.column_names

    @property
    def has_variance(self) -> bool:
        """Tell whether the method says how uncertain it is."""
        from texture.predict import METHODS

        return METHODS[self.name].has_variance

    @property
    def small_scale(self) -> Floats:
        """Variance of the bed's own patchiness in each column, shape (k,)."""
        return np.array([c.small_scale for c in self.structure])

    def predict(self, points: Floats) -> tuple[Floats, Floats]:
        """Mean and variance of the bed at points, shapes (n, k); variance NaN where the method has none."""
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
        """Covariance of the columns from their variances, shape (n, k, k), by the residual correlation."""
        sd = np.sqrt(variance)
        return np.asarray(sd[:, :, None] * sd[:, None, :] * self.structure.correlation)

    def back(self, mean: Floats) -> Floats:
        """Plain back-transform of the columns, shape (n, parts): near the median of each part, not its mean."""
        return self.treatment.back(mean)

    def expected(self, mean: Floats, variance: Floats) -> Floats:
        """Expected fractions, shape (n, parts); the plain back-transform where the method has no variance."""
        if not self.has_variance:
            return self.back(mean)
        return self.treatment.expected(mean, self.covariance(variance))

    def interval(self, mean: Floats, variance: Floats, levels: tuple[float, float] = (0.05, 0.95)) -> Floats:
        """Quantiles of each part of a sample, shape (2, n, parts); NaN where the method has no variance."""
        if not self.has_variance:
            return np.full((2, mean.shape[0], self.logratio.n_parts), np.nan)
        return self.treatment.sample_quantiles(mean, self.covariance(variance), levels)

    def cell_quantiles(self, mean: Floats, variance: Floats, levels: tuple[float, ...]) -> Floats:
        """Quantiles of the mean of a cell, shape (q, n, parts): small-scale variation averages out inside it."""
        if not self.has_variance:
            return np.full((len(levels), mean.shape[0], self.logratio.n_parts), np.nan)
        within = np.minimum(variance, self.small_scale)
        return self.treatment.cell_quantiles(mean, self.covariance(variance), levels, within)

    def likely_class(self, mean: Floats, variance: Floats) -> tuple[NDArray[np.int8], Floats]:
        """Most probable texture class of the bed at points, numbered from 1, and its probability."""
        spread = self.covariance(variance) if self.has_variance else np.zeros((*mean.shape, mean.shape[1]))
        return self.treatment.odds(mean, spread)


def make_mapper(name: str, learned: Learned, method: Method) -> Mapper:
    """Fit one method on the stations that a treatment has learned from."""
    from texture.predict import make_method

    settings = {"neighbours": method.neighbours, "neighbourhood": method.neighbourhood} if name == "kriging" else {}
    predictor = make_method(name, learned.structure, **settings)
    with _one_blas_thread():
        predictor.fit(learned.observations.points, learned.values, noise_variance=learned.noise, survey=learned.survey)
    return Mapper(name, learned.treatment, learned.structure, predictor)
