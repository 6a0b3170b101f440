"""Scores of whole distributions, from draws of each predicted sample.

- CRPS of each part: mean |X - y| - 1/2 mean |X - X'| (Gneiting & Raftery 2007, eq. 21);
- energy score of the composition: the same with the Euclidean distance between fractions (their eq. 22);
- bounds of the PIT: what is measured below the detection limit may be anything from 0 to it, and many draws may tie, so
  that each station gives an interval; histograms spread it evenly (Czado, Gneiting & Held 2009).

References
----------
Gneiting, T. & Raftery, A.E. (2007). Journal of the American Statistical Association 102, 359-378.
Czado, C., Gneiting, T. & Held, L. (2009). Biometrics 65, 1254-1261.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import prange
from numpy.typing import NDArray

from texture.compiling import compiled

__all__ = ["DrawScores", "pit_share_below", "score_draws"]

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class DrawScores:
    """Scores of each station; NaN where it is not known what to score.

    Attributes
    ----------
    crps : float array, shape (n, parts)
    energy : float array, shape (n,)
        Only of stations that know all parts.
    pit_low, pit_high : float arrays, shape (n, parts)
        Share of the draws below the measured value, and up to it.
    """

    crps: Floats
    energy: Floats
    pit_low: Floats
    pit_high: Floats


def score_draws(draws: Floats, observed: Floats, limit: float = 0.0) -> DrawScores:
    """Score the draws of each station against what was measured.

    Parameters
    ----------
    draws : float array, shape (n, m, parts)
    observed : float array, shape (n, parts)
        NaN where unknown.
    limit : float
        Detection limit.

    Examples
    --------
    >>> found = score_draws(np.array([[[0.0], [1.0]]]), np.array([[0.5]]))
    >>> float(found.crps[0, 0])  # 0.5 - 1/2 x 1/2
    0.25
    """
    n, _, parts = draws.shape
    crps, pit = np.full((n, parts), np.nan), np.full((2, n, parts), np.nan)
    energy = np.full(n, np.nan)
    _score_kernel(np.ascontiguousarray(draws), np.ascontiguousarray(observed), limit, crps, energy, pit)
    return DrawScores(crps, energy, pit[0], pit[1])


def pit_share_below(pit_low: Floats, pit_high: Floats, level: float) -> Floats:
    """Share of each station's PIT interval below a level; its mean over stations is that of the quantile's coverage."""
    width = pit_high - pit_low
    inside = (level - pit_low) / np.where(width > 0.0, width, 1.0)
    return np.where(width > 0.0, np.clip(inside, 0.0, 1.0), np.where(np.isnan(width), np.nan, pit_low < level))


@compiled(parallel=True)
def _score_kernel(draws, observed, limit, crps, energy, pit):  # type: ignore[no-untyped-def]
    n, m, parts = draws.shape
    for row in prange(n):
        if np.isnan(draws[row, 0, 0]):
            continue
        whole = True
        for p in range(parts):
            y = observed[row, p]
            if np.isnan(y):
                whole = False
                continue
            ordered = np.sort(draws[row, :, p])
            away, spread, below, up_to = 0.0, 0.0, 0, 0
            edge = limit if y < limit else y
            for k in range(m):
                away += abs(ordered[k] - y)
                spread += (2.0 * k + 1.0 - m) * ordered[k]  # sum over pairs of |x - x'|, halved twice by the order
                below += ordered[k] < y and y >= limit
                up_to += ordered[k] <= edge
            crps[row, p] = away / m - spread / m**2
            pit[0, row, p] = below / m
            pit[1, row, p] = up_to / m
        if not whole:
            continue
        away, spread = 0.0, 0.0
        for k in range(m):
            square = 0.0
            for p in range(parts):
                square += (draws[row, k, p] - observed[row, p]) ** 2
            away += np.sqrt(square)
            for j in range(k):
                square = 0.0
                for p in range(parts):
                    square += (draws[row, k, p] - draws[row, j, p]) ** 2
                spread += np.sqrt(square)
        energy[row] = away / m - spread / m**2
