"""One method fitted on some stations: from points in the plane to a normal in the columns of a treatment.

The map and its validation both come through here, so that what is validated is what is mapped.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.observations import Observations
from texture.recipe import Method
from texture.space import PLANE, Seen, Space
from texture.structure.displacement import place_noise
from texture.treatments import Censor, Treatment
from texture.validation.columns import Columns

if TYPE_CHECKING:
    from texture.composition import LogRatio
    from texture.predict.by_zone import ByZone
    from texture.structure import CovarianceSet
    from texture.zones import Share, Zones

__all__ = ["Learned", "Mapper", "columns_in", "learn", "learn_all", "learn_each", "make_mapper"]

Floats = NDArray[np.float64]
SWEEPS = (8, 2)
"""Of censored values, before the first fit and in every later turn. On 494 stations, 203 of them without gravel, the mean change of
a value fell from 0.07 in the first to 0.035 in the fourth and 0.006 in the eighth, against a noise of standard deviation 1.2. With
four before the first fit, folds need four to six fits, since what replaced the zeros is still in them; with eight, one to three."""
MOST_TURNS = 8
LEAST_TURN = 0.05
"""Turns of sweeps and fits end where the total variance moves by less than this share. On eight simulated fields with 70 % of the
gravel below the limit one turn found 45 % of the true variance of 2.25, turns to the end 85 %."""
LONGEST_LEAP = 0.75
"""Ratio of one turn's move to the one before, at most, that a leap to their limit is reckoned with."""


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
    space : Space
        Where distance is taken, and what the mean follows.
    """

    treatment: Treatment
    observations: Observations
    values: Floats
    noise: Floats
    structure: CovarianceSet
    space: Space = PLANE

    @cached_property
    def seen(self) -> Seen:
        """The stations in their space."""
        return self.space.at(self.observations.points)

    def calibrated(self, factors: Floats) -> Learned:
        """Every variance of each column multiplied by its factor, shape (k,), noise included: predictions stay, spreads follow."""
        return replace(self, noise=self.noise * factors, structure=self.structure.scaled(factors))

    @property
    def sample_noise(self) -> Floats:
        """Noise variance that a sample at each station's stated place has, shape (n, k): of its analysis and of the place."""
        values, noise = self.treatment.columns(self.observations)
        return noise + place_noise(self.structure, self.observations.accuracy_m, values)

    @property
    def survey(self) -> NDArray[np.int64] | None:
        """Survey of each station, None where there is but one."""
        survey = self.observations.survey
        return survey if np.unique(survey).size > 1 else None


def columns_in(space: Space, treatment: Treatment, observations: Observations) -> tuple[Floats, Floats]:
    """Columns of a treatment and their noise; NaN where a station lacks a covariate of the space, so that it informs nothing."""
    values, noise = treatment.columns(observations)
    missing = space.at(observations.points).missing
    if missing.any():
        values, noise = values.copy(), noise.copy()
        values[missing], noise[missing] = np.nan, 0.0
    return values, noise


def learn(
    treatment: Treatment,
    observations: Observations,
    method: Method,
    start: CovarianceSet | None = None,
    space: Space = PLANE,
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
    space : Space
        Where distance is taken; stations that lack one of its covariates inform nothing.
    """
    values, noise = columns_in(space, treatment, observations)
    first = None
    if start is None and (isinstance(treatment, Censor) or (observations.accuracy_m > 0.0).any()):
        first = _fitted(treatment, observations, values, noise, method, None, space)
        start = first.structure
    if start is not None:  # what a badly known place is worth shows only once there is a structure
        places = place_noise(start, observations.accuracy_m, values)
        if first is not None and not isinstance(treatment, Censor) and not places.any():
            return first
        noise = noise + places
    if start is None or not isinstance(treatment, Censor):
        return _fitted(treatment, observations, values, noise, method, start, space)
    low, high = treatment.bounds(observations)
    learned = _in_turns(Learned(treatment, observations, values, noise, start, space), treatment, low, high, method)
    values, noise = learned.values, learned.noise
    for _ in range(SWEEPS[1]):
        values, noise = treatment.sweep(values, noise, low, high, *_without_each(learned, values, noise))
    values, noise = treatment.told(values, noise, low, high, *_without_each(learned, values, noise))
    return replace(learned, values=values, noise=noise)


def _in_turns(learned: Learned, treatment: Censor, low: Floats, high: Floats, method: Method) -> Learned:
    """Sweep the censored values and fit the structure to them, in turns until the structure stays.

    Values and structure hang together, and at the end of the turns the structure is a maximum of the likelihood of what
    was seen, limits included, as far as expectation propagation knows it: with the pseudo-observations held, its gradient is that of
    the plain likelihood (Rasmussen & Williams 2006, section 5.5.2). Moves shrink by a constant ratio, since each turn
    sees the variance that the last one left below the limit; every second turn leaps to where they lead (Aitken).
    """
    censored = np.flatnonzero((low < high).any(axis=0))
    values, noise, before = learned.values, learned.noise, None
    for turn in range(MOST_TURNS):
        for _ in range(SWEEPS[min(turn, 1)]):
            values, noise = treatment.sweep(values, noise, low, high, *_without_each(learned, values, noise))
        fitted = _fitted(treatment, learned.observations, values, noise, method, learned.structure, learned.space)
        move = np.log(_totals(fitted.structure) / _totals(learned.structure))
        learned = fitted
        if censored.size == 0 or np.abs(move[censored]).max() < LEAST_TURN:
            break
        if before is None:
            before = move
            continue
        ratio = np.clip(np.divide(move, before, out=np.zeros_like(move), where=before != 0.0), 0.0, LONGEST_LEAP)
        leap = np.where(np.isin(np.arange(len(move)), censored), move * ratio / (1.0 - ratio), 0.0)
        learned, before = replace(learned, structure=_scaled(learned.structure, np.exp(leap))), None
    return replace(learned, values=values, noise=noise)


def _totals(structure: CovarianceSet) -> Floats:
    """Variance of each column as fitted, small-scale included, shape (k,)."""
    return np.array([max(sum(s.sill for s in c.structures) + c.small_scale, 1e-12) for c in structure])


def _scaled(structure: CovarianceSet, factors: Floats) -> CovarianceSet:
    """The same with each column's variances times a factor."""
    from texture.structure import CovarianceSet

    columns = [
        replace(c, structures=tuple(replace(s, sill=s.sill * f) for s in c.structures), small_scale=c.small_scale * f)
        for c, f in zip(structure, factors.tolist(), strict=True)
    ]
    return CovarianceSet(columns, structure.correlation)


def learn_all(
    tasks: Sequence[tuple[Treatment, Observations, CovarianceSet | None]], method: Method, space: Space = PLANE
) -> list[Learned]:
    """`learn` for several treatments or sets of stations, on as many threads as compiled code uses.

    Each is a sum in one order on one thread: the same bits on any number of cores.
    """
    return list(learn_each(tasks, method, space))


def learn_each(
    tasks: Sequence[tuple[Treatment, Observations, CovarianceSet | None]], method: Method, space: Space = PLANE
) -> Generator[Learned, None, None]:
    """As `learn_all`, one after the other as they are done; what was not begun is let go when the caller stops."""
    from concurrent.futures import ThreadPoolExecutor

    from numba import get_num_threads

    pool = ThreadPoolExecutor(min(int(get_num_threads()), max(len(tasks), 1)))
    try:
        with _one_blas_thread():
            yield from pool.map(lambda task: learn(task[0], task[1], method, task[2], space), tasks)
    finally:
        pool.shutdown(wait=True, cancel_futures=True)


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
    space: Space,
) -> Learned:
    from texture.structure import Covariance

    seen = space.at(observations.points)
    several = np.unique(observations.survey).size > 1
    structure: CovarianceSet = Covariance.fit(
        seen.points,
        values,
        method=method.fit,
        noise_variance=noise,
        survey=observations.survey if several else None,
        drift=seen.drift,
        start=start,
        anisotropy=method.anisotropy if method.anisotropy != "none" and space.ground is None else None,
        own_range_axes=space.own_range_axes(seen.points.shape[1]),
    )
    return Learned(treatment, observations, values, noise, structure, space)


def _without_each(learned: Learned, values: Floats, noise: Floats) -> tuple[Floats, Floats]:
    """Each station predicted from all others, shapes (n, k); the variance is of its sample without its own noise."""
    from texture.predict import Kriging
    from texture.predict.leave_out import leave_out

    structure = learned.structure
    with _one_blas_thread():
        kriging = Kriging(structure).fit(
            learned.seen.points, values, noise_variance=noise, survey=learned.survey, drift=learned.seen.drift
        )
        mean, variance = leave_out(kriging)
    return mean, variance - noise - np.array([c.noise for c in structure])


@dataclass(frozen=True, eq=False)
class Mapper:
    """A fitted method together with the treatment whose columns it works in.

    Attributes
    ----------
    name : str
    treatment : Treatment
    structure : CovarianceSet
    predictor : Predictor
    error : (variance (k,), correlation (k, k)) or None
        Spread of the held-out errors of a method that knows no variance; None where it is not known either.
    factors : float array, shape (k,), or None
        Calibration of a variance that does not come from `structure`.
    space : Space
        Where it sees places.
    zones : Zones or None
        Places then have to come with their `Share` of them; without it they are predicted as places in no zone.
    by_zone : ByZone or None
        What predicts them; `predictor` is that of the places in no zone.
    """

    name: str
    treatment: Treatment
    structure: CovarianceSet
    predictor: Any
    error: tuple[Floats, Floats] | None = None
    factors: Floats | None = None
    space: Space = PLANE
    zones: Zones | None = None
    by_zone: ByZone | None = None

    @property
    def logratio(self) -> LogRatio:
        """Coordinates of the treatment."""
        return self.treatment.logratio

    @property
    def column_names(self) -> tuple[str, ...]:
        """A formula for each column that is kriged."""
        return self.treatment.column_names

    @property
    def integrates(self) -> bool:
        """Tell whether the method itself says how uncertain it is, so that expected fractions integrate over that."""
        from texture.predict import METHODS

        return METHODS[self.name].has_variance

    @property
    def has_variance(self) -> bool:
        """Tell whether it is known how uncertain the map is, by the method or by its held-out errors."""
        return self.integrates or self.error is not None

    @property
    def solves(self) -> bool:
        """Tell whether the method is a kriging system, which can be solved again and left out of."""
        from texture.predict import Kriging

        return isinstance(self.predictor, Kriging)

    @property
    def has_radius(self) -> bool:
        """Tell whether the user set a radius beyond which no station counts."""
        return self.solves and self.predictor.radius_m is not None

    @property
    def small_scale(self) -> Floats:
        """Variance of the bed's patchiness in each column, shape (k,)."""
        return np.array([c.small_scale for c in self.structure])

    def predict(self, points: Floats, share: Share | None = None) -> tuple[Floats, Floats]:
        """Mean and variance of the bed at points of the plane, shapes (n, k); variance NaN where nothing is known of it."""
        return self._predict_seen(self.space.at(points), share)[:2]

    def impose(self, fractions: Floats, share: Share | None) -> Floats:
        """Put the compositions that zones are given into fractions, shape (..., n, parts)."""
        return fractions if self.zones is None or share is None else self.zones.impose(fractions, share)

    def needs_no_station(self, share: Share) -> NDArray[np.bool_]:
        """Tell which places are filled with the composition or the mean of their zone."""
        if self.zones is None or self.by_zone is None:
            return np.zeros(share.zone.shape, dtype=bool)
        return np.asarray(self.zones.is_given(share) | np.isin(share.zone, list(self.by_zone.means)))

    def _predict_seen(self, seen: Seen, share: Share | None) -> tuple[Floats, Floats, NDArray[np.int8]]:
        rung = np.zeros(len(seen.points), dtype=np.int8)
        if self.by_zone is not None and share is not None:
            mean, variance, rung = self.by_zone.predict(seen.points, share.zone, share.weight, seen.drift)
        else:
            mean, variance = self.predictor.predict(seen.points, drift=seen.drift)
        if not self.integrates and self.error is not None:
            variance = np.tile(self.error[0], (len(mean), 1))
        return mean, variance if self.factors is None else variance * self.factors, rung

    def predict_with_rung(self, points: Floats, share: Share | None = None) -> tuple[Floats, Floats, NDArray[np.int8]]:
        """Mean, variance, and per point how far the neighbourhood had to look: 0 the usual one, above it wider.

        A point that lacks a covariate counts as 1.
        """
        seen = self.space.at(points)
        guessed = seen.missing.astype(np.int8)
        if not self.solves or (self.by_zone is not None and share is not None):
            mean, variance, rung = self._predict_seen(seen, share)
            return mean, variance, np.maximum(rung, guessed)
        mean, variance, rung = self.predictor.predict_with_support(seen.points, drift=seen.drift)
        return mean, variance, np.maximum(rung.max(axis=1), guessed)

    def sample_variance(self, variance: Floats, noise: Floats) -> Floats:
        """Variance of a new sample: of the bed, of its analysis (per row) and of its survey's offset."""
        return np.asarray(variance + noise + np.array([c.noise + c.survey for c in self.structure]))

    def columns(self, points: Floats, noise: Floats, share: Share | None = None) -> Columns:
        """Predictions of samples at points, of which the analysis is known to have a noise of its own, shape (n, k)."""
        mean, variance = self.predict(points, share)
        correlation = np.broadcast_to(self.correlation, (len(mean), *self.correlation.shape))
        return Columns(mean, variance, self.sample_variance(np.zeros_like(mean), noise), correlation)

    @property
    def correlation(self) -> Floats:
        """Correlation between the columns' errors, shape (k, k)."""
        return self.structure.correlation if self.integrates or self.error is None else self.error[1]

    def covariance(self, variance: Floats) -> Floats:
        """Covariance of the columns from their variances, shape (n, k, k), by the residual correlation."""
        sd = np.sqrt(variance)
        return np.asarray(sd[:, :, None] * sd[:, None, :] * self.correlation)

    def back(self, mean: Floats) -> Floats:
        """Plain back-transform of the columns, shape (n, parts): near the median of each part, not its mean."""
        return self.treatment.back(mean)

    def expected(self, mean: Floats, variance: Floats) -> Floats:
        """Expected fractions, shape (n, parts); the plain back-transform where the method has no variance."""
        if not self.integrates:
            return self.back(mean)
        return self.treatment.expected(mean, self.covariance(variance))

    def cell_quantiles(
        self, mean: Floats, variance: Floats, levels: tuple[float, ...], averaged_out: Floats | float = 1.0
    ) -> Floats:
        """Quantiles of the mean of a cell, shape (q, n, parts).

        `averaged_out`, shape (n,), is the share of the small-scale variation that averages out inside each cell. NaN where
        nothing is known of the uncertainty.
        """
        if not self.has_variance:
            return np.full((len(levels), mean.shape[0], self.logratio.n_parts), np.nan)
        share = np.broadcast_to(np.asarray(averaged_out, dtype=np.float64), (len(mean),))
        variance = np.asarray(variance, dtype=np.float64)  # maps keep float32, too coarse to say what lies within what
        within = np.minimum(variance, self.small_scale * share[:, None])
        return self.treatment.cell_quantiles(mean, self.covariance(variance), levels, within)

    def likely_class(self, mean: Floats, variance: Floats) -> tuple[NDArray[np.int8], Floats]:
        """Most probable texture class of the bed at points, numbered from 1, and its probability."""
        spread = self.covariance(variance) if self.has_variance else np.zeros((*mean.shape, mean.shape[1]))
        return self.treatment.odds(mean, spread)


def make_mapper(
    name: str,
    learned: Learned,
    method: Method,
    error: tuple[Floats, Floats] | None = None,
    factors: Floats | None = None,
    zones: Zones | None = None,
    **settings: Any,
) -> Mapper:
    """Fit one method on the stations that a treatment has learned from, in the space that it learned in.

    Parameters
    ----------
    name : str
        Of `texture.predict.METHODS`.
    learned : Learned
    method : Method
        Of the recipe.
    error : (variance (k,), correlation (k, k)), optional
        Spread of held-out errors, for methods that know no variance.
    factors : float array, shape (k,), optional
        Calibration of a variance that does not come from the structure of `learned`.
    zones : Zones, optional
        In each zone the method is fitted to the stations that are heard there, with the same structure.
    **settings
        Further arguments of the method's class.
    """
    from texture.predict import METHODS, make_method

    settings = {**{key: getattr(method, key) for key in METHODS[name].settings}, **settings}
    seen, chosen = learned.seen, METHODS[name]

    def make() -> Any:
        return make_method(name, learned.structure, **settings)

    with _one_blas_thread():
        by_zone = None
        if zones is not None:
            sill = np.array([c.sill for c in learned.structure]) if chosen.has_variance else None
            own = zones.stations.zone[learned.observations.rows]
            by_zone = zones.predictor(make, sill).fit(
                seen.points, learned.values, learned.noise, learned.survey, own, seen.drift
            )
        if by_zone is not None and 0 in by_zone.fitted:
            predictor = by_zone.fitted[0][1]
        else:
            predictor = make().fit(
                seen.points, learned.values, noise_variance=learned.noise, survey=learned.survey, drift=seen.drift
            )
    return Mapper(name, learned.treatment, learned.structure, predictor, error, factors, learned.space, zones, by_zone)
