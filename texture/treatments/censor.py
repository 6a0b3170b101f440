"""Censoring: what is below the limit lies anywhere below it, as far as its neighbours say."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from texture.composition import censored_site
from texture.treatments.replace import Replace

__all__ = ["Censor"]

Floats = NDArray[np.float64]

LEAST_TOLD = 1e-3
"""A bound is left out that adds less than about this share to what the neighbours know (as precision)."""
DAMPING = 0.7
"""Share of the way that a censored value moves in one sweep: all move at once, and full steps overshoot each other."""


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
