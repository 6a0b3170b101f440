"""Random forest on position and covariates, with the whole distribution of what its leaves hold."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.inputs import Stations, check_drift, check_stations
from texture.structure.covariance import check_points

__all__ = ["Forest"]

Array = NDArray[np.float64]

CHUNK = 20_000  # points whose leaves are looked up together: 200 trees of 8 bytes each, 32 MB


class Forest:
    """Quantile regression forest (Meinshausen 2006), one for each column; drift columns are further predictors.

    The prediction of a point is the distribution of the training values that share its leaves, each tree counting the same. Its mean and
    variance are returned; the variance holds what the leaves do not resolve, measurement noise included. A
    station counts for less the more of its value is noise.

    Parameters
    ----------
    trees : int
    least_in_leaf : int
        Stations that each leaf keeps at least.
    seed : int

    Attributes
    ----------
    out_of_bag_ : float array, shape (n, v)
        Each station predicted by the trees that were grown without it, NaN where its value is unknown; after `fit`.

    References
    ----------
    Breiman (2001), Machine Learning 45, 5-32. Meinshausen (2006), Journal of Machine Learning Research 7, 983-999.

    Examples
    --------
    >>> x = np.linspace(0.0, 10.0, 200)[:, None]
    >>> mean, variance = Forest(trees=50).fit(x, np.where(x[:, 0] < 5.0, 1.0, 3.0)).predict([[2.0], [8.0]])
    >>> mean.round(1).tolist(), (variance < 0.05).tolist()
    ([[1.0], [3.0]], [[True], [True]])
    """

    def __init__(self, trees: int = 200, least_in_leaf: int = 5, seed: int = 0) -> None:
        if trees < 1 or least_in_leaf < 1:
            raise StructureError(
                f"forest: found {trees} trees and {least_in_leaf} in a leaf, expected at least 1 of each"
            )
        self.trees, self.least_in_leaf, self.seed = trees, least_in_leaf, seed
        self.out_of_bag_ = np.empty((0, 0))
        self._stations: Stations | None = None
        self._columns: list[_Column] = []

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> Forest:
        """Grow the trees; survey is checked and not used."""
        stations = check_stations(points, values, noise_variance, survey, drift)
        predictors = _predictors(stations.points, stations.drift)
        self._stations = stations
        self._columns = []
        self.out_of_bag_ = np.full(stations.values.shape, np.nan)
        for k in range(stations.columns):
            known = np.isfinite(stations.values[:, k])
            value, noise = stations.values[known, k], stations.noise_variance[known, k]
            column = _Column(self, predictors[known], value, noise)
            self._columns.append(column)
            self.out_of_bag_[known, k] = column.out_of_bag
        return self

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Mean and variance of the distribution at points, shapes (m, v)."""
        predictors = self._asked(points, drift)
        mean, variance = np.empty((2, len(predictors), len(self._columns)))
        for k, column in enumerate(self._columns):
            mean[:, k], variance[:, k] = column.moments(predictors)
        return mean, variance

    def quantiles(self, points: ArrayLike, levels: ArrayLike, drift: ArrayLike | None = None) -> Array:
        """Quantiles of the distribution at points, shape (q, m, v): the smallest training value that reaches each level."""
        predictors, q = self._asked(points, drift), np.atleast_1d(np.asarray(levels, dtype=np.float64))
        return np.stack([column.quantiles(predictors, q) for column in self._columns], axis=-1)

    def _asked(self, points: ArrayLike, drift: ArrayLike | None) -> Array:
        if self._stations is None:
            raise StructureError("forest: call fit before predict")
        places = check_points(points, self._stations.points.shape[1])
        return _predictors(places, check_drift(drift, len(places), self._stations))


class _Column:
    """The forest of one column, and what its leaves hold."""

    def __init__(self, settings: Forest, predictors: Array, values: Array, noise: Array) -> None:
        from sklearn.ensemble import RandomForestRegressor

        spread = float(values.var())
        weight = spread / (spread + noise) if spread > 0.0 else np.ones(len(values))
        self.values = values
        self.forest: Any = RandomForestRegressor(
            settings.trees,
            min_samples_leaf=min(settings.least_in_leaf, max(len(values) // 2, 1)),
            max_features=max(1, -(-predictors.shape[1] * 2 // 3)),
            random_state=settings.seed,
            n_jobs=-1,
        ).fit(predictors, values, sample_weight=weight)
        leaves = self.forest.apply(predictors)
        self.leaves = leaves
        self.tables = []
        for tree, leaf in zip(self.forest.estimators_, leaves.T, strict=True):
            size = tree.tree_.node_count
            count = np.maximum(np.bincount(leaf, minlength=size), 1)
            first, second = (np.bincount(leaf, values**p, minlength=size) / count for p in (1, 2))
            self.tables.append((first, second, count))
        self.out_of_bag = self._out_of_bag(leaves)

    def _out_of_bag(self, leaves: NDArray[np.int64]) -> Array:
        n = len(self.values)
        total, trees = np.zeros(n), np.zeros(n)
        for drawn, leaf, (first, _, count) in zip(self.forest.estimators_samples_, leaves.T, self.tables, strict=True):
            outside = np.ones(n, dtype=bool)
            outside[drawn] = False
            # The leaf without the station itself: what it holds of others.
            others = count[leaf] - 1
            usable = outside & (others > 0)
            total[usable] += (first[leaf] * count[leaf] - self.values)[usable] / others[usable]
            trees[usable] += 1
        return np.where(trees > 0, total / np.maximum(trees, 1), self.values.mean())

    def moments(self, predictors: Array) -> tuple[Array, Array]:
        mean, square = np.zeros((2, len(predictors)))
        for start in range(0, len(predictors), CHUNK):
            some = slice(start, start + CHUNK)
            for leaf, (first, second, _) in zip(self.forest.apply(predictors[some]).T, self.tables, strict=True):
                mean[some] += first[leaf]
                square[some] += second[leaf]
        mean, square = mean / len(self.tables), square / len(self.tables)
        return mean, np.maximum(square - mean**2, 0.0)

    def quantiles(self, predictors: Array, levels: Array) -> Array:
        order = np.argsort(self.values, kind="stable")
        found = np.empty((len(levels), len(predictors)))
        step = max(1, (1 << 22) // len(order))
        for start in range(0, len(predictors), step):
            some = slice(start, start + step)
            weight = np.zeros((len(found[0, some]), len(order)))
            for tree, leaf in enumerate(self.forest.apply(predictors[some]).T):
                count = self.tables[tree][2]
                weight += (leaf[:, None] == self.leaves[:, tree]) / count[leaf][:, None]
            reached = np.cumsum(weight[:, order], axis=1) / len(self.tables)
            for i, level in enumerate(levels):
                place = np.argmax(reached >= level - 1e-12, axis=1)
                found[i, some] = self.values[order][place]
        return found


def _predictors(points: Array, drift: Array | None) -> Array:
    return points if drift is None else np.column_stack([points, drift])
