"""The value of the nearest station: the control that every other method must beat."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.inputs import Stations, check_stations, column_trees
from texture.structure.covariance import check_points

__all__ = ["Nearest"]

Array = NDArray[np.float64]


class Nearest:
    """Nearest station, for each column the nearest that knows it.

    Examples
    --------
    >>> mean, variance = Nearest().fit([[0.0, 0.0], [9.0, 0.0]], [[1.0, np.nan], [3.0, 4.0]]).predict([[2.0, 0.0]])
    >>> mean.tolist(), variance.tolist()
    ([[1.0, 4.0]], [[nan, nan]])
    """

    def __init__(self) -> None:
        self._stations: Stations | None = None
        self._trees: list[tuple[Any, Array]] = []

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> Nearest:
        """Take in the stations; noise, survey and drift are checked and not used."""
        self._stations = check_stations(points, values, noise_variance, survey, drift)
        self._trees = column_trees(self._stations)
        return self

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Values of the nearest stations (m, v) and NaN for the variance, which this method does not know."""
        if self._stations is None:
            raise StructureError("nearest: call fit before predict")
        places = check_points(points, self._stations.points.shape[1])
        mean = np.empty((len(places), len(self._trees)))
        for k, (tree, values) in enumerate(self._trees):
            mean[:, k] = values[tree.query(places, workers=-1)[1]]
        return mean, np.full(mean.shape, np.nan)
