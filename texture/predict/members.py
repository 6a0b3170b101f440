"""Members: equally likely fields given the stations, by Matheron's rule.

A member is ``S(x) + krige(z - S - e)(x)``: a prior field with the fitted covariance, put right by kriging what the stations say
beside what the prior and simulated errors of measuring say there. Kriging weights are those of the map, so that over many
members the mean is the map's mean, and the variance at a point is the kriging variance (Journel & Huijbregts 1978, section
VII.A.2; Chilès & Delfiner 2012, section 7.3). A neighbourhood's members do not jump at the edge of a tile more than its map does.

What belongs together in the model is drawn together: structured part, small-scale variation, measurement noise and survey
offsets of the columns are each correlated by the residual correlation (a linear model with one coherence at all frequencies).
Where all columns follow one model up to a factor, errors of kriging then have exactly that correlation at every point.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray
from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]  # ships no annotations

from texture.errors import StructureError
from texture.predict.draws import NOISE, STATIONS, SURVEYS, colour, generator, place_normals
from texture.predict.kriging import Kriging
from texture.predict.spectral import SpectralPrior
from texture.structure.covariance import CovarianceSet, check_points

__all__ = ["Members"]

Array = NDArray[np.float64]
SMALL_SCALE = STATIONS + 64
"""Stream of the small-scale variation at stations."""


class Members:
    """Equally likely fields of all columns, given the stations.

    Parameters
    ----------
    kriging : Kriging
        Fitted, ordinary or simple; its covariance, stations, noise and surveys are what is simulated.
    members : sequence of int
        Numbers of the members, from 1; a member does not hang on which others are asked for.
    seed : int
    prior : float array, shape (n, v, r), optional
        Structured part of the prior fields at the stations, where it was made otherwise (circulant embedding). `predict`
        then needs the prior at its points. Left out, the spectral method makes both.
    frequencies : int
        Of the spectral method.

    Examples
    --------
    >>> from texture.structure import Covariance, Structure
    >>> c = Covariance([Structure("exponential", 1.0, 100.0)])
    >>> kriging = Kriging(c).fit([[0.0, 0.0], [50.0, 0.0], [0.0, 80.0]], [1.0, 3.0, 2.0])
    >>> Members(kriging, [1, 2]).predict([[0.0, 0.0], [400.0, 0.0]]).shape
    (2, 1, 2)
    """

    def __init__(
        self,
        kriging: Kriging,
        members: Sequence[int],
        seed: int = 1,
        prior: Array | None = None,
        frequencies: int = 2048,
    ) -> None:
        self.members, self.seed = list(members), int(seed)
        if not self.members or min(self.members) < 1:
            raise StructureError(f"members: found {list(members)!r}, expected whole numbers from 1")
        stations = kriging.stations
        self.structure = structure_of(kriging)
        self._points = stations.points
        self._colour = colour(self.structure.correlation)
        self._spectral = (
            SpectralPrior(self.structure, stations.points.shape[1], self.seed, frequencies) if prior is None else None
        )
        structured = self._spectral.at(stations.points, self.members) if self._spectral is not None else prior
        assert structured is not None
        self._first = _first_at_place(stations.points)
        self._small = self._normals(SMALL_SCALE, len(stations.points))[self._first]
        self._small *= np.sqrt([c.small_scale for c in self.structure])[:, None]
        said = structured + self._small + self._errors(kriging)
        columns = stations.values[:, :, None] - said
        # A library's sums hang on its threads; a member must not.
        with threadpool_limits(limits=1, user_api="blas"):
            self._kriging = Kriging(
                kriging.covariance, kriging.neighbours, "tile" if kriging.neighbourhood == "all" else kriging.neighbourhood,
                kriging.mean, kriging.radius_m, kriging.at_least, kriging.per_sector_at_most, kriging.drift,
            ).fit(stations.points, stations.values, stations.noise_variance, stations.survey, stations.drift, columns)  # fmt: skip

    def _normals(self, stream: int, count: int) -> Array:
        """Standard normals correlated between columns, shape (count, v, r)."""
        v = len(self.structure)
        out = np.empty((count, v, len(self.members)))
        for j, member in enumerate(self.members):
            out[:, :, j] = generator(self.seed, member, stream).standard_normal((count, v)) @ self._colour.T
        return out

    def _errors(self, kriging: Kriging) -> Array:
        """Measurement noise and survey offsets of each member's samples, shape (n, v, r)."""
        stations = kriging.stations
        own = np.array([c.noise for c in self.structure])
        spread = np.sqrt(stations.noise_variance + own)
        errors = self._normals(NOISE, stations.count) * spread[:, :, None]
        if stations.survey is not None:
            offsets = self._normals(SURVEYS, int(stations.survey.max()) + 1)
            offsets *= np.sqrt([c.survey for c in self.structure])[:, None]
            errors += offsets[stations.survey]
        return np.asarray(errors)

    def predict(
        self, points: ArrayLike, prior: Array | None = None, small_scale: bool = True, drift: ArrayLike | None = None
    ) -> Array:
        """The members at points, shape (m, v, r).

        Parameters
        ----------
        points : float array, shape (m, d), metres
        prior : float array, shape (m, v, r), optional
            Structured part of the prior fields at the points, where `Members` was given it at the stations.
        small_scale : bool
            Draw the bed's own patchiness at each point. Without it the fields are what a small area around the point has
            in common, except at a station, where the bed is known to the point. See `at_station`.
        drift : float array, shape (m, p), optional
            Drift columns at the points, where the stations had them.
        """
        return self.predict_with_moments(points, prior, small_scale, drift)[0]

    def predict_with_moments(
        self, points: ArrayLike, prior: Array | None = None, small_scale: bool = True, drift: ArrayLike | None = None
    ) -> tuple[Array, Array, Array]:
        """The members (m, v, r) as `predict`, and the kriging's own mean and variance (m, v)."""
        places = check_points(points, self._points.shape[1])
        if (prior is None) != (self._spectral is not None):
            raise StructureError("prior: give it both at the stations and at the points, or at neither")
        fields = self._spectral.at(places, self.members) if self._spectral is not None else prior
        assert fields is not None
        mean, variance, kriged = self._kriging.predict_columns(places, drift)
        fields = np.add(fields, kriged, out=kriged)
        station = self.at_station(places)
        here = station >= 0
        fields[here] += self._small[station[here]]
        if small_scale and not here.all():
            fields[~here] += self.patchiness(places[~here])
        return fields, mean, variance

    def patchiness(self, points: Array) -> Array:
        """Small-scale variation at points away from stations, shape (m, v, r): a function of place and member."""
        drawn = place_normals(points, self.seed, self.members, len(self.structure))
        drawn = np.einsum("ab,mbr->mar", self._colour, drawn)
        return np.asarray(drawn * np.sqrt([c.small_scale for c in self.structure])[:, None])

    def at_station(self, points: Array) -> NDArray[np.int64]:
        """Number of the station within a micrometre of each point, -1 where there is none; shape (m,)."""
        from scipy.spatial import cKDTree

        from texture.structure.compiled import COINCIDENT_M

        distance, station = cKDTree(self._points).query(points, distance_upper_bound=2.0 * COINCIDENT_M)
        return np.where(distance <= COINCIDENT_M, station, -1).astype(np.int64)


def structure_of(kriging: Kriging) -> CovarianceSet:
    """Covariance of each column, and the correlation between columns (none where one covariance serves all)."""
    covariance = kriging.covariance
    if isinstance(covariance, CovarianceSet):
        return covariance
    return CovarianceSet([covariance] * kriging.stations.columns)


def _first_at_place(points: Array) -> NDArray[np.int64]:
    """For each station the first one at the same place: samples of one spot share its small-scale variation."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    from texture.structure.compiled import COINCIDENT_M

    n = len(points)
    pairs = cKDTree(points).query_pairs(COINCIDENT_M, output_type="ndarray")
    label = connected_components(coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n)), False)[1]
    return np.asarray(np.unique(label, return_index=True)[1][label])
