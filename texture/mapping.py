"""One method fitted on some stations: from points in the plane to a normal in the columns of a treatment.

The map and its validation both come through here, so that what is validated is what is mapped.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Generic

import numpy as np
from numpy.typing import NDArray

from texture.learning import Learned, T, one_blas_thread
from texture.recipe import Method
from texture.space import PLANE, Seen, Space
from texture.treatments import Treatment
from texture.validation.columns import Columns

if TYPE_CHECKING:
    from texture.composition import LogRatio
    from texture.predict.by_zone import ByZone
    from texture.structure import CovarianceSet
    from texture.zones import Share, Zones

__all__ = ["Mapper", "make_mapper"]

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Mapper(Generic[T]):
    """A fitted method together with the treatment whose columns it works in.

    Attributes
    ----------
    name : str
    treatment : Columned
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
    treatment: T
    structure: CovarianceSet
    predictor: Any
    error: tuple[Floats, Floats] | None = None
    factors: Floats | None = None
    space: Space = PLANE
    zones: Zones | None = None
    by_zone: ByZone | None = None

    @property
    def logratio(self: Mapper[Treatment]) -> LogRatio:
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

    def predict_with_rung(
        self, points: Floats, share: Share | None = None
    ) -> tuple[Floats, Floats, NDArray[np.int8], NDArray[np.bool_]]:
        """Mean, variance, and per point how far the neighbourhood had to look: 0 the usual one, above it wider.

        The last array tells which points lack a covariate, so that the nearest value stands in, or lie off the water that is laid out.
        """
        seen = self.space.at(points)
        if not self.solves or (self.by_zone is not None and share is not None):
            return *self._predict_seen(seen, share), seen.missing
        mean, variance, rung = self.predictor.predict_with_support(seen.points, drift=seen.drift)
        return mean, variance, rung.max(axis=1), seen.missing

    def added_by_sample(self, variance: Floats, noise: Floats) -> Floats:
        """What a new sample adds to the variance of the bed: noise of its analysis (per row) and the offset of its survey.

        Where the method's variance is that of a sample already, only what that falls short of the sample's own noise by.
        """
        from texture.predict import METHODS

        own = noise + np.array([c.noise + c.survey for c in self.structure])
        return np.asarray(np.maximum(own - variance, 0.0) if METHODS[self.name].variance_of_sample else own)

    def columns(self, points: Floats, noise: Floats, share: Share | None = None) -> Columns:
        """Predictions of samples at points, of which the analysis is known to have a noise of its own, shape (n, k)."""
        mean, variance = self.predict(points, share)
        correlation = np.broadcast_to(self.correlation, (len(mean), *self.correlation.shape))
        return Columns(mean, variance, self.added_by_sample(variance, noise), correlation)

    @property
    def correlation(self) -> Floats:
        """Correlation between the columns' errors, shape (k, k)."""
        return self.structure.correlation if self.integrates or self.error is None else self.error[1]

    def covariance(self, variance: Floats) -> Floats:
        """Covariance of the columns from their variances, shape (n, k, k), by the residual correlation."""
        sd = np.sqrt(variance)
        return np.asarray(sd[:, :, None] * sd[:, None, :] * self.correlation)

    def back(self: Mapper[Treatment], mean: Floats) -> Floats:
        """Plain back-transform of the columns, shape (n, parts): near the median of each part, not its mean."""
        return self.treatment.back(mean)

    def expected(self: Mapper[Treatment], mean: Floats, variance: Floats) -> Floats:
        """Expected fractions, shape (n, parts); the plain back-transform where the method has no variance."""
        if not self.integrates:
            return self.back(mean)
        return self.treatment.expected(mean, self.covariance(variance))

    def cell_quantiles(
        self: Mapper[Treatment],
        mean: Floats,
        variance: Floats,
        levels: tuple[float, ...],
        averaged_out: Floats | float = 1.0,
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

    def likely_class(self: Mapper[Treatment], mean: Floats, variance: Floats) -> tuple[NDArray[np.int8], Floats]:
        """Most probable texture class of the bed at points, numbered from 1, and its probability."""
        spread = self.covariance(variance) if self.has_variance else np.zeros((*mean.shape, mean.shape[1]))
        return self.treatment.odds(mean, spread)


def make_mapper(
    name: str,
    learned: Learned[T],
    method: Method,
    error: tuple[Floats, Floats] | None = None,
    factors: Floats | None = None,
    zones: Zones | None = None,
    seed: int = 0,
    **settings: Any,
) -> Mapper[T]:
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
    seed : int
        Of the recipe, for methods that draw.
    **settings
        Further arguments of the method's class.
    """
    from texture.predict import METHODS, make_method

    of_recipe = {key: seed if key == "seed" else getattr(method, key) for key in METHODS[name].settings}
    settings = {**of_recipe, **settings}
    seen, chosen = learned.seen, METHODS[name]

    def make() -> Any:
        return make_method(name, learned.structure, **settings)

    with one_blas_thread():
        by_zone = None
        if zones is not None:
            sill = np.array([c.sill for c in learned.structure]) if chosen.has_variance else None
            own = zones.stations.zone[learned.observations.rows]
            noise, survey = np.array([[c.noise, c.survey] for c in learned.structure]).T
            by_zone = zones.predictor(make, sill, noise, survey).fit(
                seen.points, learned.values, learned.noise, learned.survey, own, seen.drift
            )
        if by_zone is not None and 0 in by_zone.fitted:
            predictor = by_zone.fitted[0][1]
        else:
            predictor = make().fit(
                seen.points, learned.values, noise_variance=learned.noise, survey=learned.survey, drift=seen.drift
            )
    return Mapper(name, learned.treatment, learned.structure, predictor, error, factors, learned.space, zones, by_zone)
