"""What was predicted of held-out stations, in the columns of a treatment."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Columns"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Columns:
    """Held-out predictions of some stations, as normals in the columns of a treatment.

    Attributes
    ----------
    mean : float array, shape (n, k)
    variance : float array, shape (n, k)
        Of the bed at a point; NaN for a method without one.
    noise : float array, shape (n, k)
        What a sample adds to it: analysis, rounding, the offset of its survey.
    correlation : float array, shape (n, k, k)
        Between columns.
    """

    mean: Floats
    variance: Floats
    noise: Floats
    correlation: Floats

    @classmethod
    def empty(cls, n: int, k: int) -> Columns:
        """Nothing predicted yet."""
        mean, variance, noise = np.full((3, n, k), np.nan)
        return cls(mean, variance, noise, np.full((n, k, k), np.nan))

    def put(self, rows: Ints, other: Columns) -> None:
        """Take over the predictions of some stations."""
        for name in ("mean", "variance", "noise", "correlation"):
            getattr(self, name)[rows] = getattr(other, name)

    @property
    def sample_variance(self) -> Floats:
        """Variance of a sample, shape (n, k)."""
        return self.variance + self.noise

    def covariance(self, variance: Floats) -> Floats:
        """Covariance matrices (n, k, k) of given variances (n, k)."""
        sd = np.sqrt(variance)
        return np.asarray(sd[:, :, None] * sd[:, None, :] * self.correlation)

    def scaled(self, factors: Floats) -> Columns:
        """The same with every variance multiplied, factors of shape (n, k) or (k,)."""
        return Columns(self.mean, self.variance * factors, self.noise * factors, self.correlation)
