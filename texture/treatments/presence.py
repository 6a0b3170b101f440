"""Presence × share: whether a part is there is mapped beside how much of it where it is."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition import presence_forward
from texture.treatments.replace import Replace

if TYPE_CHECKING:
    from texture.composition.presence_draws import Presence as Distribution
    from texture.observations import Observations

__all__ = ["Presence"]

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Presence(Replace):
    """Gravel is there or not; its share is kriged from the stations that have it, its presence from all.

    The last column is the indicator of presence, kriged as it is. Words and limits that do not say whether there is
    gravel say nothing of it here. Words that name it tell of its share alone: since others do not deny it, presence would
    only ever be told by words, never absence.
    """

    part: str = "gravel"

    @property
    def label(self) -> str:
        """The treatment in a few words, for tables."""
        return f"presence × share of {self.part}"

    @property
    def column_names(self) -> tuple[str, ...]:
        """A formula for each column that is kriged."""
        return (*self.logratio.coordinate_names, f"presence of {self.part}")

    @cached_property
    def distribution(self) -> Distribution:
        """Fractions when the part may be absent."""
        from texture.composition.presence_draws import Presence as Distribution

        return Distribution(self.logratio, self.part)

    @cached_property
    def own(self) -> int:
        """The coordinate that compares the part with its sibling."""
        return self.logratio.partition.paths[self.logratio.parts.index(self.part)][-1][0]

    def columns(self, observations: Observations) -> tuple[Floats, Floats]:
        """Values and noise variances of the stations, shapes (n, d + 1)."""
        coordinates, noise = observations.coordinates(self.logratio)
        present = np.full(observations.count, np.nan)
        exact, bounded, column = observations.exact, observations.bounded, self.logratio.parts.index(self.part)
        coordinates[exact], present[exact] = presence_forward(self.logratio, observations.fractions[exact], self.part)
        present[bounded & (observations.low[:, column] >= self.limit)] = 1.0
        present[bounded & (observations.high[:, column] <= self.limit)] = 0.0
        named = np.char.find(np.char.lower(observations.described), self.part[0]) >= 0
        coordinates[(present == 0.0) | (np.isnan(present) & ~named), self.own] = np.nan
        noise[np.isnan(coordinates)] = 0.0
        return np.column_stack([coordinates, present]), np.column_stack([noise, np.zeros(len(present))])

    def back(self, mean: Floats) -> Floats:
        """Back-transform without a variance, shape (n, parts)."""
        from texture.composition import presence_expected

        return presence_expected(self.logratio, self.logratio.inverse(mean[:, :-1]), mean[:, -1], self.part)

    def expected(self, mean: Floats, covariance: Floats) -> Floats:
        """Expected fractions, shape (n, parts)."""
        return self.distribution.expected(*self._given(mean, covariance))

    def sample_quantiles(self, mean: Floats, covariance: Floats, levels: tuple[float, ...]) -> Floats:
        """Quantiles of a sample, shape (q, n, parts): the part is in it or not."""
        return self._down_to_nothing(self.distribution.quantiles(*self._given(mean, covariance), levels), levels)

    def samples(self, mean: Floats, covariance: Floats, normals: Floats) -> Floats:
        """Fractions of samples, shape (n, m, parts), from standard normal draws (m, k): the part is in each or not."""
        return self.distribution.samples(*self._given(mean, covariance), normals)

    def bounds(self, observations: Observations) -> tuple[Floats, Floats]:
        """Columns of exact stations twice, shapes (n, k): what is below the limit is absent."""
        values = np.where(observations.exact[:, None], self.columns(observations)[0], np.nan)
        return values, values

    def cell_quantiles(self, mean: Floats, covariance: Floats, levels: tuple[float, ...], within: Floats) -> Floats:
        """Quantiles of the mean of a cell, shape (q, n, parts), some of which may have the part and some not."""
        between = np.maximum(covariance[:, -1, -1] - within[:, -1], 0.0)
        return self.distribution.quantiles(
            *self._given(mean, covariance), levels, within=within[:, :-1], between=between
        )

    def odds(self, mean: Floats, covariance: Floats) -> tuple[NDArray[np.int8], Floats]:
        """Most probable texture class at a point, numbered from 1, and its probability; shapes (n,)."""
        return self.distribution.odds(*self._given(mean, covariance), "folk", trace=self.trace)

    def _given(self, mean: Floats, covariance: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        """Coordinates, their covariance, the probability of presence, and its correlation with each coordinate."""
        inner = np.ascontiguousarray(covariance[:, :-1, :-1])
        scale = np.sqrt(np.einsum("nii->ni", covariance))
        both = scale[:, :-1] * scale[:, -1:]
        correlation = np.divide(covariance[:, :-1, -1], both, out=np.zeros_like(both), where=both > 0)
        # Share and presence are never seen apart: where there is none, there is no share.
        correlation[:, self.own] = 0.0
        return np.ascontiguousarray(mean[:, :-1]), inner, mean[:, -1], correlation
