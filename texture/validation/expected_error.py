"""What error to expect at a distance from the samples, from the errors at held-out stations."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["ErrorCurve"]

Floats = NDArray[np.float64]

LEAST_IN_BIN = 20  # held-out stations behind each step: its root mean square error is then known to about a sixth
MOST_BINS = 20


@dataclass(frozen=True, eq=False)
class ErrorCurve:
    """Root mean square error over the parts, rising with the distance to the nearest sample.

    Held-out stations are sorted by the distance they were predicted over and cut into bins of equal numbers; the mean square
    errors of the bins are made to rise by pooling neighbours that fall (isotonic regression, Barlow et al. 1972). Between the bins' mean
    distances the square is interpolated; outside them it is that of the last bin, since nothing was tested there.

    Attributes
    ----------
    distance : float array, shape (b,)
        Mean distance in each bin; empty where nothing was scored.
    square : float array, shape (b,)
        Mean square error there.
    """

    distance: Floats
    square: Floats

    @classmethod
    def learn(cls, distance: Floats, observed: Floats, predicted: Floats) -> ErrorCurve:
        """From held-out stations: distance (n,), fractions (n, parts) with NaN where unknown.

        >>> d = np.repeat([1.0, 2.0], 20)
        >>> curve = ErrorCurve.learn(d, np.zeros((40, 1)), d[:, None] / 10.0)
        >>> curve.at(np.array([0.0, 1.5, 9.0])).round(3).tolist()
        [0.1, 0.158, 0.2]
        """
        from sklearn.isotonic import isotonic_regression

        error = (predicted - observed) ** 2
        known = np.isfinite(error).all(axis=1)
        d, e = distance[known], error[known].mean(axis=1)
        if d.size == 0:
            return cls(np.empty(0), np.empty(0))
        order = np.argsort(d, kind="stable")
        bins = np.array_split(order, max(1, min(MOST_BINS, d.size // LEAST_IN_BIN)))
        centres = np.array([d[b].mean() for b in bins])
        means, sizes = np.array([e[b].mean() for b in bins]), np.array([float(b.size) for b in bins])
        return cls(centres, np.asarray(isotonic_regression(means, sample_weight=sizes), dtype=np.float64))

    def at(self, distance: Floats) -> Floats:
        """Expected root mean square error at distances, shape (m,); NaN where nothing was scored."""
        if self.distance.size == 0:
            return np.full(np.shape(distance), np.nan)
        return np.asarray(np.sqrt(np.interp(distance, self.distance, self.square)))
