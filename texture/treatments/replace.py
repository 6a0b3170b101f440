"""Replacement of what is below a limit, and of the tree's shares none: the columns are the coordinates as they are."""

from __future__ import annotations

from dataclasses import dataclass
from dataclasses import replace as changed
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition import LogRatio, censoring_bounds

if TYPE_CHECKING:
    from texture.observations import Observations

__all__ = ["Replace", "Shares", "Treatment"]

Floats = NDArray[np.float64]

LEAST_TRACE = 0.01
"""Gravel below it names no class of the map; some mapping practice takes this (common practice, no source)."""


@dataclass(frozen=True)
class Replace:
    """Parts below the coordinates' limit are replaced; the columns are the log-ratio coordinates.

    Parameters
    ----------
    logratio : LogRatio
        Its `detection_limit` is the limit of the replacement.
    """

    logratio: LogRatio

    @property
    def limit(self) -> float:
        """Limit below which parts are treated."""
        return self.logratio.detection_limit

    @property
    def trace(self) -> float:
        """Gravel fraction below which it names no class of the map."""
        return max(LEAST_TRACE, self.limit)

    @property
    def label(self) -> str:
        """The treatment in a few words, for tables."""
        return f"replaced below {self.limit:g}"

    @property
    def column_names(self) -> tuple[str, ...]:
        """A formula for each column that is kriged."""
        return self.logratio.coordinate_names

    def with_limit(self, limit: float) -> Treatment:
        """The same treatment with another limit."""
        return changed(self, logratio=changed(self.logratio, detection_limit=limit))

    def columns(self, observations: Observations) -> tuple[Floats, Floats]:
        """Values and noise variances of the stations, shapes (n, k); NaN where a station says nothing of a column."""
        return observations.coordinates(self.logratio)

    def back(self, mean: Floats) -> Floats:
        """Back-transform without a variance, shape (n, parts)."""
        return self.logratio.inverse(mean)

    def expected(self, mean: Floats, covariance: Floats) -> Floats:
        """Expected fractions from means (n, k) and covariances (n, k, k) of the columns, shape (n, parts)."""
        return self.logratio.expected(mean, covariance)

    def sample_quantiles(self, mean: Floats, covariance: Floats, levels: tuple[float, ...]) -> Floats:
        """Quantiles of a sample, shape (q, n, parts); below the limit a sample is not told from one without."""
        return self._down_to_nothing(self.logratio.quantiles(mean, covariance, levels), levels)

    def samples(self, mean: Floats, covariance: Floats, normals: Floats) -> Floats:
        """Fractions of samples, shape (n, m, parts), from standard normal draws (m, k)."""
        values, vectors = np.linalg.eigh(covariance)
        factor = vectors * np.sqrt(np.maximum(values, 0.0))[:, None, :]
        return self.logratio.inverse(mean[:, None, :] + np.einsum("mk,njk->nmj", normals, factor))

    def bounds(self, observations: Observations) -> tuple[Floats, Floats]:
        """Bounds between which each exact station's columns lie, shapes (n, k); equal where known exactly, NaN where not."""
        low, high = np.full((2, observations.count, len(self.column_names)), np.nan)
        exact = observations.exact
        if self.logratio.kind in ("tree", "alr") and self.limit > 0.0:
            low[exact], high[exact] = censoring_bounds(self.logratio, observations.fractions[exact])
        else:
            values = self.columns(observations)[0][exact]
            low[exact], high[exact] = values, values
        return low, high

    def _down_to_nothing(self, quantiles: Floats, levels: tuple[float, ...]) -> Floats:
        lower = np.array(levels)[:, None, None] < 0.5
        return np.where(lower & (quantiles < self.limit), 0.0, quantiles)

    def cell_quantiles(self, mean: Floats, covariance: Floats, levels: tuple[float, ...], within: Floats) -> Floats:
        """Quantiles of the mean of a cell, shape (q, n, parts).

        `within`, shape (n, k), is the variance that averages out inside the cell. In coordinates without shares (ilr,
        alr) there is no such form: it is then left out of the variance.
        """
        if self.logratio.amalgamates:
            return self.logratio.quantiles(mean, covariance, levels, within=within)
        variance = np.einsum("nii->ni", covariance)
        kept = np.sqrt(np.clip(1.0 - np.divide(within, variance, out=np.zeros_like(mean), where=variance > 0), 0, 1))
        return self.logratio.quantiles(mean, covariance * kept[:, :, None] * kept[:, None, :], levels)

    def odds(self, mean: Floats, covariance: Floats) -> tuple[NDArray[np.int8], Floats]:
        """Most probable texture class at a point, numbered from 1, and its probability; shapes (n,)."""
        from texture.composition import class_odds

        found = class_odds(self.logratio, mean, covariance, "folk", trace=self.trace)
        return found.number, found.probability


class Shares(Replace):
    """The shares of the tree as they are; nothing is replaced."""

    @property
    def label(self) -> str:
        """The treatment in a few words, for tables."""
        return "shares, no logarithms"

    def with_limit(self, limit: float) -> Treatment:
        """Shares know no limit: the same."""
        return self


Treatment = Replace
"""What all treatments can do is what the plainest can."""
