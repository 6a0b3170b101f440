"""Scales on which a single number is mapped: as it is, as its logarithm, or as a log-odds."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from texture.errors import CompositionError

__all__ = ["Scale"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Scale:
    """A number's own scale and the one it is mapped on.

    Parameters
    ----------
    name : {"plain", "log", "logit"}
        As it is; ln(x) for what is above zero; ln(x / (upper - x)) for what lies between zero and `upper`.
    upper : float
        Largest value possible, for "logit" alone.

    Examples
    --------
    >>> scale = Scale("log")
    >>> scale.forward(np.array([0.0, 1.0, np.e])), scale.expected(np.zeros(1), np.full(1, 2.0)).round(4)
    (array([nan,  0.,  1.]), array([2.7183]))
    """

    name: Literal["plain", "log", "logit"]
    upper: float = 1.0

    def __post_init__(self) -> None:
        if self.name not in ("plain", "log", "logit"):
            raise CompositionError(f'scale "{self.name}" is unknown; expected plain, log or logit')
        if not self.upper > 0.0:
            raise CompositionError(f"upper = {self.upper:g}, expected more than 0")

    def fits(self, value: npt.ArrayLike) -> npt.NDArray[np.bool_]:
        """Tell which values the scale can hold; NaN cannot be held."""
        x = np.asarray(value, dtype=np.float64)
        if self.name == "plain":
            return np.isfinite(x)
        return np.asarray(np.isfinite(x) & (x > 0.0) & ((x < self.upper) | (self.name == "log")))

    def forward(self, value: npt.ArrayLike) -> Array:
        """The scaled values; NaN where the scale cannot hold them."""
        x = np.where(self.fits(value), value, np.nan)
        if self.name == "plain":
            return x
        return np.asarray(np.log(x) if self.name == "log" else np.log(x / (self.upper - x)))

    def slope(self, value: npt.ArrayLike) -> Array:
        """Change of the scaled value for a small change of the value: what turns widths into widths."""
        x = np.where(self.fits(value), value, np.nan)
        if self.name == "plain":
            return np.where(np.isnan(x), np.nan, 1.0)
        return np.asarray(1.0 / x if self.name == "log" else self.upper / (x * (self.upper - x)))

    def back(self, scaled: npt.ArrayLike) -> Array:
        """Values of scaled numbers; of a mean this is the median, not the mean, of what it came from."""
        return self.expected(scaled, 0.0)

    def expected(self, mean: npt.ArrayLike, variance: npt.ArrayLike) -> Array:
        """Expected value where the scaled one is normal.

        exp(mean + variance / 2) for "log" (Aitchison & Brown 1957, The Lognormal Distribution); for "logit" the
        logistic-normal integral to 3e-9.

        Parameters
        ----------
        mean, variance : array-like, broadcast together
        """
        m, v = np.broadcast_arrays(np.asarray(mean, dtype=np.float64), np.asarray(variance, dtype=np.float64))
        if self.name == "plain":
            return np.array(m)
        if self.name == "log":
            return np.asarray(np.exp(m + 0.5 * v))
        # Compiled: imported only where it is needed.
        from texture.composition.logistic_normal import logistic_means

        return np.asarray(self.upper * logistic_means(m.ravel(), v.ravel()).reshape(m.shape))
