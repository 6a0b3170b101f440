"""Random forest, and kriging of what it leaves at the stations."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.forest import Forest
from texture.predict.kriging import Kriging
from texture.structure import CovarianceSet

__all__ = ["ForestKriging"]

Array = NDArray[np.float64]


class ForestKriging:
    """The forest's prediction plus its kriged residuals.

    Residuals are out of bag: a forest fits its own stations so well that the residuals of the fit would leave nothing to krige and
    promise too much. Their covariance is fitted here; the variance is that of kriging them.

    Parameters
    ----------
    trees, least_in_leaf, seed
        As for `Forest`.
    neighbours : int
        As for `Kriging`.

    Attributes
    ----------
    covariance_ : CovarianceSet
        Of the residuals, after `fit`.
    """

    def __init__(self, trees: int = 200, least_in_leaf: int = 5, seed: int = 0, neighbours: int = 32) -> None:
        self.forest = Forest(trees, least_in_leaf, seed)
        self.neighbours = neighbours
        self.covariance_: CovarianceSet | None = None
        self._kriging: Kriging | None = None

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> ForestKriging:
        """Grow the forest, fit the covariance of its out-of-bag residuals, and take them in."""
        from texture.structure import Covariance

        table = np.asarray(values, dtype=np.float64)
        table = table[:, None] if table.ndim == 1 else table
        self.forest.fit(points, table, noise_variance, survey, drift)
        left = table - self.forest.out_of_bag_
        self.covariance_ = Covariance.fit(points, left, noise_variance=noise_variance, survey=survey)
        self._kriging = Kriging(self.covariance_, self.neighbours).fit(points, left, noise_variance, survey)
        return self

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Mean and variance at points, shapes (m, v)."""
        if self._kriging is None:
            raise StructureError("forest kriging: call fit before predict")
        mean, variance = self._kriging.predict(points)
        return mean + self.forest.predict(points, drift)[0], variance
