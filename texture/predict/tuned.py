"""Inverse distance with the power and the number of neighbours that leave-one-out finds best."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.inputs import Stations, check_stations, column_trees
from texture.predict.inverse_distance import InverseDistance

__all__ = ["TunedInverseDistance"]

Array = NDArray[np.float64]

POWERS = (1.0, 1.5, 2.0, 2.5, 3.0, 4.0)
NEIGHBOURS = (4, 8, 12, 16, 24, 32)
MOST_STATIONS = 5_000  # that are left out in turn; a mean square of so many is known to two percent


class TunedInverseDistance:
    """`InverseDistance` whose power and neighbours are learned from the stations, one choice for each column.

    Each station is predicted from the others elsewhere, those at its own place left out with it; the pair of lowest mean square error
    is taken, the first of equals.

    Parameters
    ----------
    powers : sequence of float
    neighbours : sequence of int

    Attributes
    ----------
    chosen_ : list of (power, neighbours)
        For each column, after `fit`.

    Examples
    --------
    >>> x = np.arange(40.0)[:, None]
    >>> method = TunedInverseDistance().fit(x, x[:, 0] ** 2)
    >>> method.chosen_, method.predict([[3.5]])[0].round(1).tolist()
    ([(4.0, 4)], [[12.5]])
    """

    def __init__(self, powers: tuple[float, ...] = POWERS, neighbours: tuple[int, ...] = NEIGHBOURS) -> None:
        if not powers or not neighbours or min(powers) <= 0.0 or min(neighbours) < 1:
            raise StructureError(f"inverse distance: found powers {powers!r} and neighbours {neighbours!r}, expected "
                                 "some above 0")  # fmt: skip
        self.powers, self.neighbours = tuple(powers), tuple(neighbours)
        self.chosen_: list[tuple[float, int]] = []
        self._columns: list[InverseDistance] = []

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> TunedInverseDistance:
        """Take in the stations and choose; noise, survey and drift are checked and not used."""
        stations = check_stations(points, values, noise_variance, survey, drift)
        self.chosen_, self._columns = [], []
        for k, (tree, known) in enumerate(column_trees(stations)):
            power, count = self._choose(tree, known)
            self.chosen_.append((power, count))
            self._columns.append(InverseDistance(power, count).fit(*_column(stations, k)))
        return self

    def _choose(self, tree: Any, values: Array) -> tuple[float, int]:
        n = len(values)
        asked = np.arange(n)[:: max(1, -(-n // MOST_STATIONS))]
        most = min(max(self.neighbours), n - 1)
        if most < 2:
            return self.powers[0], self.neighbours[0]
        distance, near = tree.query(tree.data[asked], k=most + 1, workers=-1)
        # The station itself and all at its place stand at distance 0, first in the row.
        other = distance > 0.0
        nearest = np.where(other, distance, np.inf).min(axis=1, keepdims=True)
        usable = np.isfinite(nearest[:, 0])
        if not usable.any():
            return self.powers[0], self.neighbours[0]
        distance, near, other, nearest = (a[usable] for a in (distance, near, other, nearest))
        rank = np.cumsum(other, axis=1)
        best, least = (self.powers[0], self.neighbours[0]), np.inf
        for power in self.powers:
            weight = np.where(other, (np.where(other, distance, 1.0) / nearest) ** -power, 0.0)
            for count in self.neighbours:
                kept = weight * (rank <= count)
                error = (kept * values[near]).sum(axis=1) / kept.sum(axis=1) - values[asked[usable]]
                square = float((error**2).mean())
                if square < least * (1.0 - 1e-12):
                    best, least = (power, count), square
        return best

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Weighted averages (m, v), and NaN for the variance, which this method does not know."""
        if not self._columns:
            raise StructureError("inverse distance: call fit before predict")
        mean = np.column_stack([method.predict(points)[0] for method in self._columns])
        return mean, np.full(mean.shape, np.nan)


def _column(stations: Stations, k: int) -> tuple[Array, Array]:
    return stations.points, stations.values[:, k]
