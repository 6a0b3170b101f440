"""One method in several regions: each has stations of its own, and none hears those beyond a hard edge."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

__all__ = ["ByZone", "Region"]

Array = NDArray[np.float64]
Ints = NDArray[np.integer]
FEWEST = 3
"""Stations of its own, in every column, that a zone needs for more than their mean."""


@dataclass(frozen=True)
class Region:
    """How one zone is predicted.

    Parameters
    ----------
    kind : {"stations", "mean", "given"}
        By the method from its own stations; by their mean; or not at all, since its bed is given: the map around it is
        predicted there, for a soft edge to fade into.
    hard : bool
        Whether its stations are not heard outside it.
    """

    kind: Literal["stations", "mean", "given"]
    hard: bool


class ByZone:
    """Predict each place from the stations of its zone.

    Parameters
    ----------
    make : callable
        Makes an unfitted predictor, see `texture.predict.methods.Predictor`.
    regions : sequence of Region
        Zone 1, 2, …; zone 0 is the map around them, which hears all stations but those of zones with a hard edge.
    sill : float array, shape (v,), or None
        Variance of the bed in each column, for means; None for methods without a variance.
    noise, survey : float array, shape (v,), optional
        Noise variance that all stations have beside their own, and variance of the offset that those of a survey share; for means.

    Examples
    --------
    A zone around x = 10 with a hard edge; the station in it is not heard outside, nor the others inside.

    >>> from texture.predict.nearest import Nearest
    >>> zoned = ByZone(Nearest, [Region("mean", True)], None)
    >>> _ = zoned.fit(np.array([[0.0], [1.0], [10.0]]), np.array([[1.0], [1.0], [5.0]]), np.zeros((3, 1)), None, np.array([0, 0, 1]))
    >>> zoned.predict(np.array([[9.0], [9.0]]), np.array([0, 1]), np.ones(2))[0].tolist()
    [[1.0], [5.0]]
    """

    def __init__(
        self,
        make: Callable[[], Any],
        regions: Sequence[Region],
        sill: Array | None,
        noise: Array | None = None,
        survey: Array | None = None,
    ) -> None:
        self.make, self.regions, self.sill = make, tuple(regions), sill
        self.noise, self.survey = noise, survey
        self.fitted: dict[int, tuple[Ints, Any]] = {}
        self.means: dict[int, tuple[Array, Array]] = {}
        self.columns = 0

    def fit(
        self,
        points: Array,
        values: Array,
        noise_variance: Array,
        survey: Ints | None,
        zone: Ints,
        drift: Array | None = None,
    ) -> ByZone:
        """Take in the stations, shapes (n, d), (n, v), (n, v), (n,) or None, the zone that each stands in, (n,),
        and drift columns, (n, p) or None."""
        self.columns = values.shape[1]
        least = FEWEST * (1 if drift is None else 1 + drift.shape[1])
        hard = np.array([False, *(r.hard for r in self.regions)])
        kinds = ("stations", *(r.kind for r in self.regions))
        for number, kind in enumerate(kinds):
            index = np.flatnonzero(~hard[zone] if number == 0 else zone == number)
            enough = bool((np.isfinite(values[index]).sum(axis=0) >= least).all())
            if kind == "stations" and enough:
                own_survey = None if survey is None else survey[index]
                predictor = self.make().fit(
                    points[index],
                    values[index],
                    noise_variance=noise_variance[index],
                    survey=own_survey,
                    drift=None if drift is None else drift[index],
                )
                self.fitted[number] = (index, predictor)
            elif kind != "given":
                self.means[number] = self._mean(values, noise_variance, survey, index)
        return self

    def _mean(self, values: Array, noise: Array, survey: Ints | None, index: Ints) -> tuple[Array, Array]:
        """Mean of each column over some stations, over all where none of these knows it, and its variance at a point.

        Generalised least squares with the offset of each survey (Sherman & Morrison 1950): a survey of many stations counts
        little more than the offset that they share lets it.
        """
        mean, variance = np.empty((2, values.shape[1]))
        for v in range(values.shape[1]):
            own = index[np.isfinite(values[index, v])]
            own = own if own.size else np.flatnonzero(np.isfinite(values[:, v]))
            sill = 1.0 if self.sill is None else max(float(self.sill[v]), 1e-12)
            weight = 1.0 / (sill + noise[own, v] + (0.0 if self.noise is None else self.noise[v]))
            if self.survey is not None and survey is not None:
                _, group = np.unique(survey[own], return_inverse=True)
                weight /= 1.0 + self.survey[v] * np.bincount(group, weight)[group]
            mean[v] = (weight * values[own, v]).sum() / weight.sum()
            variance[v] = np.nan if self.sill is None else sill + 1.0 / weight.sum()
        return mean, variance

    def predict(
        self, points: Array, zone: Ints, weight: NDArray[np.floating], drift: Array | None = None
    ) -> tuple[Array, Array, NDArray[np.int8]]:
        """Predict places by the zones they lie in.

        Parameters
        ----------
        points : float array, shape (m, d)
        zone : int array, shape (m,)
        weight : float array, shape (m,)
            Of the zone's own prediction; the rest is that of the map around.
        drift : float array, shape (m, p), or None

        Returns
        -------
        mean, variance : float arrays, shape (m, v)
        rung : int8 array, shape (m,)
            0 the usual neighbourhood; above it a wider one, or a mean instead of the method.
        """
        mean, variance = np.zeros((2, len(points), self.columns))
        rung = np.zeros(len(points), dtype=np.int8)
        for number in np.unique(zone).tolist():
            given = number > 0 and self.regions[number - 1].kind == "given"
            own = 0 if given else number
            some = np.flatnonzero(zone == number)
            mean[some], variance[some], rung[some] = self._region(
                own, points[some], None if drift is None else drift[some]
            )
            soft = some[weight[some] < 1.0]
            if soft.size and own > 0:
                around, spread, wider = self._region(0, points[soft], None if drift is None else drift[soft])
                w = weight[soft, None]
                mean[soft] = w * mean[soft] + (1.0 - w) * around
                variance[soft] = w * variance[soft] + (1.0 - w) * spread
                rung[soft] = np.where(w[:, 0] >= 0.5, rung[soft], wider)
        return mean, variance, rung

    def _region(self, number: int, points: Array, drift: Array | None) -> tuple[Array, Array, NDArray[np.int8]]:
        if number in self.means:
            mean, variance = self.means[number]
            shape = (len(points), mean.size)
            return np.broadcast_to(mean, shape), np.broadcast_to(variance, shape), np.ones(len(points), dtype=np.int8)
        predictor = self.fitted[number][1]
        if hasattr(predictor, "predict_with_support"):
            mean, variance, rung = predictor.predict_with_support(points, drift=drift)
            return mean, variance, rung.max(axis=1)
        mean, variance = predictor.predict(points, drift=drift)
        return mean, variance, np.zeros(len(points), dtype=np.int8)
