"""Kriging: from values at stations to a mean and a variance anywhere."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError, TextureWarning
from texture.predict.inputs import Stations, check_columns, check_drift, check_stations
from texture.predict.system import MOST_DENSE, System
from texture.structure.covariance import Covariance, CovarianceSet, check_points
from texture.structure.plane import check_metres

__all__ = ["Kriging"]

Array = NDArray[np.float64]


class Kriging:
    """Simple, ordinary and universal kriging with local neighbourhoods or all stations.

    Parameters
    ----------
    covariance : Covariance or CovarianceSet
        One for all columns of values, or one for each.
    neighbours : int or None
        Stations near a point that are used; None uses all stations (exact, up to 3,000 of them).
    neighbourhood : {"tile", "nearest"}
        "tile": one set of stations for each small tile, the union of the `neighbours` nearest of a few of its places
        (typically twice `neighbours`); fast, and closer to the all-station answer. "nearest": exactly `neighbours`
        for each point. A rule (`radius_m`, `at_least`, `per_sector_at_most`) always works point by point, that is
        as "nearest".
    mean : float or sequence of float, optional
        Known mean, for all columns or for each: simple kriging. By default the mean is unknown and constant within
        a neighbourhood: ordinary kriging.
    radius_m : float, optional
        Farther stations are not used. Measured in the covariance's metric (along the longer axis).
    at_least : int
        Fewer stations by the rule and the point falls to the next rung (see `support`).
    per_sector_at_most : int, optional
        At most so many stations from each quadrant around the point (each orthant beyond two dimensions).
    drift : {"global", "local"}
        Whether the coefficients of drift columns are one generalised least squares fit to all stations, with its
        variance carried into each prediction, or are fitted within each neighbourhood. With all stations the two
        are the same thing: universal kriging.

    Notes
    -----
    A prediction is a function of position alone: the same bits for a point alone, in any batch and on any number of
    threads. Variances are those of the bed at a point: small-scale variation is in them, measurement noise and survey
    offsets are not. At a station without noise the prediction is the datum and the variance 0.
    Theory: Chilès & Delfiner (2012), chapter 3; common neighbourhood: Vigsnes et al. (2017).

    Examples
    --------
    >>> from texture.structure import Covariance, Structure
    >>> c = Covariance([Structure("exponential", 10.0, 9.98577)])
    >>> k = Kriging(c, neighbours=None).fit([[0., 0.], [10., 0.], [0., 10.]], [1.0, 3.0, 2.0])
    >>> mean, variance = k.predict([[0.0, 0.0], [5.0, 5.0]])
    >>> mean.round(3).tolist(), variance.round(3).tolist()
    ([[1.0], [2.013]], [[0.0], [11.188]])
    """

    def __init__(
        self,
        covariance: Covariance | CovarianceSet,
        neighbours: int | None = 32,
        neighbourhood: str = "tile",
        mean: float | Sequence[float] | None = None,
        radius_m: float | None = None,
        at_least: int = 1,
        per_sector_at_most: int | None = None,
        drift: str = "global",
    ) -> None:
        if not isinstance(covariance, Covariance | CovarianceSet):
            raise StructureError(f"covariance: found {type(covariance).__name__}, expected Covariance or CovarianceSet")
        if neighbours is not None and (int(neighbours) != neighbours or not 1 <= neighbours <= 2000):
            raise StructureError(f"neighbours: found {neighbours!r}, expected a whole number from 1 to 2000, or None")
        if neighbourhood not in ("tile", "nearest"):
            raise StructureError(f"neighbourhood: found {neighbourhood!r}, expected tile or nearest")
        if drift not in ("global", "local"):
            raise StructureError(f"drift: found {drift!r}, expected global or local")
        if radius_m is not None and not radius_m > 0:
            raise StructureError(f"radius_m: found {radius_m!r}, expected a length above 0")
        if at_least < 1 or (neighbours is not None and at_least > neighbours):
            raise StructureError(f"at_least: found {at_least}, expected 1 to the number of neighbours ({neighbours})")
        if per_sector_at_most is not None and per_sector_at_most < 1:
            raise StructureError(f"per_sector_at_most: found {per_sector_at_most}, expected 1 or more")
        ruled = radius_m is not None or per_sector_at_most is not None
        if ruled and neighbours is None:
            raise StructureError("neighbours=None uses all stations; radius_m and per_sector_at_most need a number")
        self.covariance = covariance
        self.neighbours = neighbours
        self.neighbourhood = "all" if neighbours is None else "nearest" if ruled else neighbourhood
        self.mean = mean
        self.radius_m, self.at_least, self.per_sector_at_most = radius_m, at_least, per_sector_at_most
        self.drift = drift
        self.repairs_: dict[str, int] = {"neighbourhoods": 0, "stations": 0}
        self._systems: list[System] | None = None
        self._stations: Stations | None = None
        self._extra_count = 0

    def __repr__(self) -> str:
        fitted = "" if self._stations is None else f", fitted to {self._stations.count} stations"
        return f"Kriging({self.covariance!r}, neighbours={self.neighbours}, {self.neighbourhood!r}{fitted})"

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
        columns: ArrayLike | None = None,
    ) -> Kriging:
        """Take in the stations.

        Parameters
        ----------
        points : float array, shape (n, d), metres
        values : float array, shape (n,) or (n, v)
            NaN where a column is unknown: each column uses its own stations.
        noise_variance : float array, shape (n,) or (n, v), optional
            Variance of measurement noise of each value, added to the covariance's `noise`.
        survey : array, shape (n,), optional
            Label of the survey each station belongs to; needed where the covariance has survey variance.
        drift : float array, shape (n, p), optional
            Drift columns at the stations, without the constant.
        columns : float array, shape (n, v, c), optional
            Further values at the stations, c for each column of `values`, such as simulated ones. They are kriged with
            the very weights of `values`: same stations, covariance, noise, factor. What stands where `values` is NaN
            is ignored. `predict_columns` returns them.

        Returns
        -------
        Kriging
            Itself.

        Raises
        ------
        StructureError
            Shapes that disagree, a column without stations, a model that is not valid in d dimensions, drift together
            with a known mean, more than 3,000 stations with ``neighbours=None``.
        """
        stations = check_stations(points, values, noise_variance, survey, drift)
        check_metres(stations.points)
        covariances = self._covariances(stations.columns)
        means = self._means(stations.columns)
        if means is not None and stations.drift is not None:
            raise StructureError("drift and a known mean exclude each other; leave out one")
        if self.neighbourhood == "all" and stations.count > MOST_DENSE:
            raise StructureError(
                f"neighbours=None: found {stations.count} stations, expected at most {MOST_DENSE}; give a number"
            )
        for v, covariance in enumerate(covariances):
            covariance.check_dimensions(stations.points.shape[1])
            if covariance.survey > 0.0 and stations.survey is None:
                raise StructureError(
                    f"column {v}: the covariance has survey offsets (variance {covariance.survey:g}); "
                    "give the survey of each station"
                )
            _warn_if_too_smooth(covariance, v, float(stations.noise_variance[:, v].min()))
        self._stations = stations
        extra = check_columns(columns, stations)
        self._extra_count = extra.shape[2]
        self._systems = System.make(
            stations, extra, covariances, means, self.neighbours, self.neighbourhood, self.drift
        )
        return self

    def _covariances(self, columns: int) -> list[Covariance]:
        if isinstance(self.covariance, Covariance):
            return [self.covariance] * columns
        if len(self.covariance) != columns:
            raise StructureError(
                f"covariance set: found {len(self.covariance)}, expected one for each of {columns} columns"
            )
        return list(self.covariance)

    def _means(self, columns: int) -> Array | None:
        if self.mean is None:
            return None
        means = np.asarray(self.mean, dtype=np.float64)
        if means.shape not in ((), (columns,)) or not np.isfinite(means).all():
            raise StructureError(f"mean: found {self.mean!r}, expected a number or one for each of {columns} columns")
        return np.broadcast_to(means, (columns,))

    def _ready(self) -> tuple[Stations, list[System]]:
        if self._stations is None or self._systems is None:
            raise StructureError("kriging: call fit before predict")
        return self._stations, self._systems

    def _predict(self, points: ArrayLike, drift: ArrayLike | None) -> tuple[Array, Array, NDArray[np.int8]]:
        stations, systems = self._ready()
        cells = check_points(points, stations.points.shape[1])
        drift_columns = check_drift(drift, len(cells), stations)
        mean = np.full((len(cells), stations.columns, 1 + self._extra_count), np.nan)
        variance = np.full((len(cells), stations.columns), np.nan)
        rung = np.zeros((len(cells), stations.columns), dtype=np.int8)
        radius2 = np.inf if self.radius_m is None else self.radius_m**2
        rule = (radius2, self.at_least, self.per_sector_at_most or 0)
        self.repairs_ = {"neighbourhoods": 0, "stations": 0}
        for system in systems:
            repaired = system.predict(cells, drift_columns, rule, mean, variance, rung)
            self.repairs_["neighbourhoods"] += int(repaired[0])
            self.repairs_["stations"] += int(repaired[1])
        return mean, variance, rung

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Mean and variance of the bed at points.

        Parameters
        ----------
        points : float array, shape (m, d), metres
        drift : float array, shape (m, p), optional
            The drift columns at the points; needed when the stations had them.

        Returns
        -------
        mean, variance : float arrays, shape (m, v)
            Finite everywhere; `support` tells how good the ground was. `repairs_` counts the neighbourhoods with
            redundant stations (a variance given the others below 1e-12 of their own), which are left out there.
        """
        mean, variance, _ = self._predict(points, drift)
        return mean[:, :, 0], variance

    def predict_columns(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array, Array]:
        """Mean and variance as `predict`, and the further columns that `fit` was given.

        Parameters
        ----------
        points : float array, shape (m, d), metres
        drift : float array, shape (m, p), optional

        Returns
        -------
        mean, variance : float arrays, shape (m, v)
        columns : float array, shape (m, v, c)
            Column j is what `predict` would give had `fit` got ``columns[:, :, j]`` for its values: survey offsets and
            drift coefficients are estimated from each column itself, a known mean holds for each column.

        Examples
        --------
        >>> from texture.structure import Covariance, Structure
        >>> c = Covariance([Structure("exponential", 1.0, 10.0)], noise=0.1)
        >>> points, values = [[0.0], [4.0], [9.0]], [[1.0], [2.0], [4.0]]
        >>> further = np.array([[[10.0, 1.0]], [[20.0, 1.0]], [[40.0, 1.0]]])
        >>> mean, variance, columns = Kriging(c).fit(points, values, columns=further).predict_columns([[5.0]])
        >>> columns.shape, bool(np.isclose(columns[0, 0, 0], 10.0 * mean[0, 0])), float(columns[0, 0, 1])
        ((1, 1, 2), True, 1.0)
        """
        mean, variance, _ = self._predict(points, drift)
        return mean[:, :, 0], variance, mean[:, :, 1:]

    def predict_with_support(
        self, points: ArrayLike, drift: ArrayLike | None = None
    ) -> tuple[Array, Array, NDArray[np.int8]]:
        """Mean, variance and `support` in one go."""
        mean, variance, rung = self._predict(points, drift)
        return mean[:, :, 0], variance, rung

    def support(self, points: ArrayLike) -> NDArray[np.int8]:
        """Rung of the ladder that serves each point and column, shape (m, v).

        0: the neighbourhood as asked for. 1: the rule found fewer than `at_least` stations, the nearest `neighbours`
        serve without radius or sectors. 2: the column has fewer than `at_least` stations anywhere, its mean serves.
        """
        stations, systems = self._ready()
        cells = check_points(points, stations.points.shape[1])
        rung = np.zeros((len(cells), stations.columns), dtype=np.int8)
        radius2 = np.inf if self.radius_m is None else self.radius_m**2
        for system in systems:
            system.support(cells, (radius2, self.at_least, self.per_sector_at_most or 0), rung)
        return rung

    def sample_variance(
        self,
        points: ArrayLike,
        drift: ArrayLike | None = None,
        noise_variance: ArrayLike | None = None,
    ) -> Array:
        """Variance of a new sample at points: of the bed there, plus noise, plus the offset of a new survey.

        Parameters
        ----------
        points : float array, shape (m, d), metres
        drift : float array, shape (m, p), optional
        noise_variance : float array, shape (m,) or (m, v), optional
            Known noise variance of the new samples, added to the covariance's `noise`.

        Returns
        -------
        float array, shape (m, v)
        """
        _, variance, _ = self._predict(points, drift)
        variance += np.array([c.noise + c.survey for c in self._covariances(variance.shape[1])])
        if noise_variance is not None:
            extra = np.asarray(noise_variance, dtype=np.float64)
            variance += extra[:, None] if extra.ndim == 1 else extra
        return variance

    def stations_of(self, point: ArrayLike, column: int = 0) -> NDArray[np.int64]:
        """Row numbers (into what `fit` was given) of all stations that serve one point (d,) in one column."""
        return np.unique(np.concatenate([rows for rows, _ in self.neighbourhoods_of(point, column)]))

    def neighbourhoods_of(self, point: ArrayLike, column: int = 0) -> list[tuple[NDArray[np.int64], float]]:
        """The sets of stations that serve one point (d,) in one column, and the weight of each set's answer.

        Where tiles overlap there is more than one; the weights add up to one. Mean and variance at the point are the
        weighted averages of what kriging from each set gives.
        """
        stations, systems = self._ready()
        place = check_points(np.atleast_2d(np.asarray(point, dtype=np.float64)), stations.points.shape[1])
        system = next(s for s in systems if column in s.columns)
        radius2 = np.inf if self.radius_m is None else self.radius_m**2
        served = system.served_by(place, (radius2, self.at_least, self.per_sector_at_most or 0))
        return [(system.rows[numbers], weight) for numbers, weight in served]

    @property
    def systems(self) -> Sequence[Any]:
        """The prepared systems, one for each set of columns that share stations and metric."""
        return self._ready()[1]

    @property
    def stations(self) -> Stations:
        """The stations as `fit` took them in."""
        return self._ready()[0]


def _warn_if_too_smooth(covariance: Covariance, column: int, least_noise: float) -> None:
    names = {s.model for s in covariance.structures}
    if names == {"gaussian"} and covariance.small_scale + covariance.noise + least_noise < 1e-6 * covariance.sill:
        warnings.warn(
            f"column {column}: gaussian model without small-scale variation or noise; nearby stations then nearly "
            "determine one another and redundant ones are left out; add a little of either or use matern",
            TextureWarning,
            stacklevel=3,
        )
