"""A weighted average of a few methods, weighted by their held-out error."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError

if TYPE_CHECKING:
    from texture.predict.methods import Predictor

__all__ = ["Average", "average_weights", "mix"]

Array = NDArray[np.float64]

MEMBERS = 3
"""Methods that are averaged at most: a fourth is worse than the three before it, and seldom errs the other way."""


def average_weights(errors: ArrayLike, most: int = MEMBERS) -> Array:
    """Weights that sum to 1: inverse mean square error of the `most` best, 0 for the others.

    Parameters
    ----------
    errors : array-like, shape (methods,)
        Mean square held-out error of each method, above 0; NaN for a method that is not to take part.

    Examples
    --------
    >>> average_weights([1.0, 2.0, 4.0, 3.0], most=2).round(3).tolist()
    [0.667, 0.333, 0.0, 0.0]
    """
    error = np.asarray(errors, dtype=np.float64)
    usable = np.flatnonzero(np.isfinite(error))
    if usable.size == 0:
        raise StructureError("average: no method has a held-out error, expected at least one")
    best = usable[np.argsort(error[usable], kind="stable")[:most]]
    weights = np.zeros(error.size)
    least = float(error[best].min())
    weights[best] = (error[best] == 0.0) if least == 0.0 else least / error[best]
    return np.asarray(weights / weights.sum())


def mix(means: Sequence[Array], variances: Sequence[Array], weights: Array) -> tuple[Array, Array]:
    """Mean and variance of a mixture of predictions, shapes (m, v): members that disagree widen it."""
    mean = sum((w * m for w, m in zip(weights, means, strict=True)), np.zeros_like(means[0]))
    square = [w * (v + (m - mean) ** 2) for w, m, v in zip(weights, means, variances, strict=True)]
    return mean, np.asarray(sum(square, np.zeros_like(mean)))


class Average:
    """A mixture of fitted methods.

    Parameters
    ----------
    members : sequence of Predictor
        Unfitted.
    weights : sequence of float
        One for each member, summing to 1.
    spreads : sequence of float array, shape (v,), or None
        Variance of the members that know none.

    Examples
    --------
    >>> from texture.predict import InverseDistance, Nearest
    >>> average = Average([Nearest(), InverseDistance(neighbours=None)], [0.5, 0.5], [np.ones(1), np.ones(1)])
    >>> mean, variance = average.fit([[0.0], [3.0]], [1.0, 6.0]).predict([[1.0]])
    >>> mean.tolist(), variance.tolist()  # of 1 and 2, half a unit from their mean
    ([[1.5]], [[1.25]])
    """

    def __init__(
        self, members: Sequence[Predictor], weights: Sequence[float], spreads: Sequence[Array | None] | None = None
    ) -> None:
        if len(members) != len(weights) or not members or abs(sum(weights) - 1.0) > 1e-9:
            raise StructureError(
                f"average: found {len(members)} members and weights {list(weights)}, expected one weight each, summing to 1"
            )
        self.members, self.weights = list(members), np.asarray(weights, dtype=np.float64)
        self.spreads = list(spreads) if spreads is not None else [None] * len(self.members)

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> Average:
        """Fit every member."""
        for member in self.members:
            member.fit(points, values, noise_variance=noise_variance, survey=survey, drift=drift)
        return self

    def predict(self, points: ArrayLike, drift: ArrayLike | None = None) -> tuple[Array, Array]:
        """Mean and variance at points, shapes (m, v)."""
        means, variances = [], []
        for member, spread in zip(self.members, self.spreads, strict=True):
            mean, variance = member.predict(points, drift=drift)
            means.append(mean)
            variances.append(variance if spread is None else np.tile(spread, (len(mean), 1)))
        return mix(means, variances, self.weights)
