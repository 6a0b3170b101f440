"""Linear interpolation on the Delaunay triangles between stations; outside them the nearest station."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.inputs import Stations, check_stations, column_trees
from texture.structure.covariance import check_points

__all__ = ["Triangulation"]

Array = NDArray[np.float64]


class Triangulation:
    """Linear on a triangulation (Delaunay 1934), for each column between the stations that know it.

    Outside the triangles, and where a column's stations make none (fewer than three, or all on a line), the nearest station
    serves. Stations at one place are averaged.

    Attributes
    ----------
    outside_ : int
        Values of the last prediction that the nearest station gave.

    Examples
    --------
    >>> corners = [[0.0, 0.0], [9.0, 0.0], [0.0, 9.0]]
    >>> method = Triangulation().fit(corners, [0.0, 9.0, 18.0])
    >>> method.predict([[3.0, 3.0], [20.0, 0.0]])[0].round(6).tolist(), method.outside_
    ([[9.0], [9.0]], 1)
    """

    def __init__(self) -> None:
        self._stations: Stations | None = None
        self._surfaces: list[Any] = []
        self._trees: list[tuple[Any, Array]] = []
        self.outside_ = 0

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> Triangulation:
        """Take in the stations; noise, survey and drift are checked and not used.

        Raises
        ------
        StructureError
            For points that do not lie in a plane.
        """
        stations = check_stations(points, values, noise_variance, survey, drift)
        if stations.points.shape[1] != 2:
            raise StructureError(
                f"triangulation: found points of {stations.points.shape[1]} coordinates, expected 2; choose another method"
            )
        self._stations, self._trees = stations, column_trees(stations)
        self._surfaces = [_surface(stations.points, column) for column in stations.values.T]
        return self

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Values (m, v), and NaN for the variance, which this method does not know."""
        if self._stations is None:
            raise StructureError("triangulation: call fit before predict")
        places = check_points(points, 2)
        mean = np.full((len(places), len(self._trees)), np.nan)
        self.outside_ = 0
        for k, ((tree, values), surface) in enumerate(zip(self._trees, self._surfaces, strict=True)):
            if surface is not None:
                mean[:, k] = surface(places)
            outside = np.flatnonzero(np.isnan(mean[:, k]))
            self.outside_ += outside.size
            mean[outside, k] = values[tree.query(places[outside], workers=-1)[1]]
        return mean, np.full(mean.shape, np.nan)


def _surface(points: Array, column: Array) -> Any:
    """The interpolator of one column, None where its stations make no triangle."""
    from scipy.interpolate import LinearNDInterpolator
    from scipy.spatial import QhullError

    known = np.isfinite(column)
    place, which = np.unique(points[known], axis=0, return_inverse=True)
    which = which.reshape(-1)
    if len(place) < 3:
        return None
    value = np.bincount(which, column[known]) / np.bincount(which)
    try:
        return LinearNDInterpolator(place, value)
    except QhullError:  # all on a line
        return None
