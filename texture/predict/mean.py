"""The mean of all stations everywhere: what is left when place tells nothing."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.inputs import Stations, check_stations
from texture.structure.covariance import check_points

__all__ = ["WholeMean"]

Array = NDArray[np.float64]


class WholeMean:
    """Mean of each column over the stations that know it.

    Examples
    --------
    >>> WholeMean().fit([[0.0], [3.0]], [1.0, 6.0]).predict([[100.0]])[0].tolist()
    [[3.5]]
    """

    def __init__(self) -> None:
        self._stations: Stations | None = None

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> WholeMean:
        """Take in the stations; noise, survey and drift are checked and not used."""
        self._stations = check_stations(points, values, noise_variance, survey, drift)
        return self

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """The means (m, v) and NaN for the variance."""
        if self._stations is None:
            raise StructureError("mean: call fit before predict")
        places = check_points(points, self._stations.points.shape[1])
        mean = np.tile(np.nanmean(self._stations.values, axis=0), (len(places), 1))
        return mean, np.full(mean.shape, np.nan)
