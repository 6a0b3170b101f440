"""Inverse distance weighting (Shepard 1968), the second control."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.inputs import Stations, check_stations, column_trees
from texture.structure.covariance import check_points

__all__ = ["InverseDistance"]

Array = NDArray[np.float64]

CHUNK = 1 << 18


class InverseDistance:
    """Average of the nearest stations, weighted by distance to a negative power.

    Parameters
    ----------
    power : float, > 0
    neighbours : int or None
        Stations used, for each column those that know it; None uses all.

    Examples
    --------
    >>> InverseDistance().fit([[0.0], [3.0]], [1.0, 6.0]).predict([[1.0], [3.0]])[0].tolist()
    [[2.0], [6.0]]
    """

    def __init__(self, power: float = 2.0, neighbours: int | None = 16) -> None:
        if not power > 0:
            raise StructureError(f"power: found {power!r}, expected a number above 0")
        if neighbours is not None and neighbours < 1:
            raise StructureError(f"neighbours: found {neighbours!r}, expected a whole number of at least 1, or None")
        self.power, self.neighbours = float(power), neighbours
        self._stations: Stations | None = None
        self._trees: list[tuple[Any, Array]] = []

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> InverseDistance:
        """Take in the stations; noise, survey and drift are checked and not used."""
        self._stations = check_stations(points, values, noise_variance, survey, drift)
        self._trees = column_trees(self._stations)
        return self

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Weighted averages (m, v) and NaN for the variance; at a station its value (the average of several)."""
        if self._stations is None:
            raise StructureError("inverse distance: call fit before predict")
        places = check_points(points, self._stations.points.shape[1])
        mean = np.empty((len(places), len(self._trees)))
        for k, (tree, values) in enumerate(self._trees):
            count = len(values) if self.neighbours is None else min(self.neighbours, len(values))
            step = max(1, CHUNK * 16 // count)
            for begin in range(0, len(places), step):
                distance, near = tree.query(places[begin : begin + step], k=np.arange(1, count + 1), workers=-1)
                mean[begin : begin + step, k] = self._average(distance, values[near])
        return mean, np.full(mean.shape, np.nan)

    def _average(self, distance: Array, values: Array) -> Array:
        # Distances over the smallest of the row: no overflow however close, and a row at a station keeps it alone.
        least = distance[:, :1]
        with np.errstate(invalid="ignore", divide="ignore"):
            weight = np.where(least > 0.0, (distance / least) ** -self.power, (distance == 0.0).astype(np.float64))
        average: Array = (weight * values).sum(axis=1) / weight.sum(axis=1)
        return average
