"""What is done with zeros and parts below a limit: from observations to the columns that are kriged, and back.

A treatment turns what the stations say into columns of numbers with their noise, and what is predicted of the
columns into expected fractions, quantiles and class odds. It learns nothing by itself: `texture.mapping.learn` fits the
columns' structure, anew in each fold, and every treatment is used in the same way.

``replace``   parts below a limit become 0.65 × limit; the limit may lie above the laboratory's
``censor``    they lie somewhere below the limit, as far as the neighbours say
``presence``  gravel is there or not, and how much of it only where it is
``shares``    the tree's shares as they are, without logarithms: the control
"""

from __future__ import annotations

from dataclasses import dataclass
from dataclasses import replace as changed
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition import LogRatio, censored_site, censoring_bounds, presence_forward
from texture.errors import RecipeError

if TYPE_CHECKING:
    from texture.composition.presence_draws import Presence as Distribution
    from texture.observations import Observations
    from texture.recipe import Composition

__all__ = ["LIMIT_STEPS", "Censor", "Presence", "Replace", "Shares", "Treatment", "candidates", "plain_treatment"]

Floats = NDArray[np.float64]

LEAST_TRACE = 0.01
"""Gravel below it names no class of the map; some mapping practice takes this (common practice, no source)."""
LIMIT_STEPS = (1.0, 4.0, 10.0)
"""Limits that replacement is tried with, in laboratory limits: 0.005, 0.02 and 0.05 by default."""
HIGHEST_LIMIT = 0.15
"""No limit above this is tried: near a third, replaced parts would no longer be the small ones."""
LEAST_TOLD = 1e-3
"""A bound is left out that adds less than about this share to what the neighbours know (as precision)."""
DAMPING = 0.7
"""Share of the way that a censored value moves in one sweep: all move at once, and full steps overshoot each other."""


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


@dataclass(frozen=True)
class Censor(Replace):
    """Parts below the limit lie anywhere below it: each becomes a value and a noise by what its neighbours say."""

    @property
    def label(self) -> str:
        """The treatment in a few words, for tables."""
        return f"censored below {self.limit:g}"

    def sweep(
        self, values: Floats, noise: Floats, low: Floats, high: Floats, mean: Floats, variance: Floats
    ) -> tuple[Floats, Floats]:
        """One sweep of expectation propagation over the censored values.

        Parameters
        ----------
        values, noise : float arrays, shape (n, k)
            As they are now.
        low, high : float arrays, shape (n, k)
            As `bounds` gives them.
        mean, variance : float arrays, shape (n, k)
            Each station's prediction without itself; the variance is that of its sample but for its own noise.
        """
        zero = (low < high) & (variance > 0.0)
        values, noise = values.copy(), noise.copy()
        site, spread = censored_site(mean[zero], variance[zero], low[zero], high[zero])
        before = np.where(np.isnan(values[zero]), 0.0, 1.0 / np.maximum(noise[zero], 1e-12))
        after = np.where(np.isnan(site), 0.0, 1.0 / np.where(np.isnan(spread), 1.0, spread))
        precision = (1.0 - DAMPING) * before + DAMPING * after
        pull = (1.0 - DAMPING) * before * np.nan_to_num(values[zero]) + DAMPING * after * np.nan_to_num(site)
        # No value is let go in between: the neighbours may come to know less of it than they do now.
        floor = np.maximum(LEAST_TOLD / variance[zero] - precision, 0.0)
        values[zero] = (pull + floor * mean[zero]) / (precision + floor)
        noise[zero] = 1.0 / (precision + floor)
        return values, noise

    def told(
        self, values: Floats, noise: Floats, low: Floats, high: Floats, mean: Floats, variance: Floats
    ) -> tuple[Floats, Floats]:
        """Values and noise at the end, arguments as for `sweep`: NaN where a bound tells less than the neighbours know."""
        nothing = (low < high) & (noise * 2.0 * LEAST_TOLD > variance)
        return np.where(nothing, np.nan, values), np.where(nothing, 0.0, noise)


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


Treatment = Replace
"""What all treatments can do is what the plainest can."""


def plain_treatment(composition: Composition) -> Treatment:
    """Replacement at the laboratory's limit in the recipe's coordinates, or their shares."""
    make = Shares if composition.logratio == "shares" else Replace
    return make(LogRatio(composition.parts, composition.logratio, composition.tree, composition.detection_limit))


def candidates(composition: Composition, observations: Observations, has_variance: bool) -> list[Treatment]:
    """The treatments that a recipe allows, the simplest first; held-out error picks where there are several.

    Replacement is tried at higher limits where they would touch a measured part, censoring and presence where a part lies
    below the laboratory's limit; where none does, that limit alone stands beside the shares.

    Parameters
    ----------
    composition : Composition
        Of the recipe.
    observations : Observations
    has_variance : bool
        Whether the map's method has a variance; censoring needs one.

    Raises
    ------
    RecipeError
        Censoring with a method that has no variance.
    """
    plain = plain_treatment(composition)
    zeros, limit = composition.zeros, composition.detection_limit
    tree = composition.logratio == "tree"
    if zeros == "censor":
        if not has_variance:
            raise RecipeError(
                'composition.zeros = "censor" needs a method with a variance, such as method.name = "kriging"'
            )
        return [Censor(plain.logratio)]
    if zeros == "presence":
        return [Presence(plain.logratio)]
    known = observations.fractions[observations.exact]
    steps = [s for s in LIMIT_STEPS if s == 1.0 or (s * limit <= HIGHEST_LIMIT and bool((known < s * limit).any()))]
    replaced = [plain.with_limit(s * limit) for s in steps]
    if zeros == "replace" or isinstance(plain, Shares):
        return replaced if zeros == "replace" else [plain]
    found: list[Treatment] = [
        *replaced,
        Shares(changed(plain.logratio, kind="shares", tree=composition.tree, reference=None)),
    ]
    gravel = known[:, composition.parts.index("gravel")]
    absent = gravel < limit
    if tree and min(int(absent.sum()), int((gravel >= limit).sum())) >= LEAST_OF_EACH:
        found.append(Presence(plain.logratio))
    if has_variance and composition.logratio in ("tree", "alr") and bool((known < limit).any()):
        found.append(Censor(plain.logratio))
    return found


LEAST_OF_EACH = 10
"""Stations with and without gravel from which presence can be mapped: fewer show no structure in a fold."""
