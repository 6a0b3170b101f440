"""Which method to trust: lowest energy score, the simplest within one standard error of it, and who cannot be told apart.

The method that treatments of zeros were compared by stands here with the one that was taken; all others have zeros replaced at the
laboratory's limit. The comparison is of methods as they can be had, not of methods with all else equal.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Standing", "cannot_be_told_apart", "rank_methods"]

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Standing:
    """One method's place in the comparison.

    Attributes
    ----------
    method : str
    energy_score : float
        Mean over the stations that know all parts, in fractions; lower is better.
    above_best : float
        How much that lies above the best method's.
    standard_error : float
        Of `above_best`, from resampled blocks (from the stations where blocks are few).
    low, high : float
        90 % interval of `above_best`.
    simplest : bool
        Whether this is the simplest method within one standard error of the best.
    """

    method: str
    energy_score: float
    above_best: float
    standard_error: float
    low: float
    high: float
    simplest: bool

    @property
    def apart(self) -> bool:
        """Tell whether it is worse than the best beyond what chance does."""
        return self.low > 0.0


def rank_methods(methods: Sequence[str], energy: Floats, resamples: Floats) -> list[Standing]:
    """Compare methods on the same stations.

    Parameters
    ----------
    methods : sequence of str
        The simplest first.
    energy : float array, shape (methods, n)
        Energy score of each station; a station with a NaN in any row is left out of all.
    resamples : float array, shape (b, n)
        How often each station stands in each resample; may be empty.

    Returns
    -------
    list of Standing
        In the given order; empty where no station knows all parts.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> good = rng.uniform(0.1, 0.2, 200)
    >>> ranks = rank_methods(["mean", "kriging"], np.stack([good + 0.1, good]), np.empty((0, 200)))
    >>> [(r.method, r.simplest, r.apart) for r in ranks]
    [('mean', False, True), ('kriging', True, False)]
    """
    known = np.isfinite(energy).all(axis=0)
    if not known.any():
        return []
    score = energy[:, known].mean(axis=1)
    best = int(np.argmin(score))
    excess = energy[:, known] - energy[best, known]
    kept = resamples[:, known]
    kept = kept[kept.sum(axis=1) > 0.0]
    if len(kept):
        drawn = kept @ excess.T / kept.sum(axis=1, keepdims=True)
        error, (low, high) = drawn.std(axis=0), np.quantile(drawn, [0.05, 0.95], axis=0)
    else:
        error = excess.std(axis=1) / np.sqrt(known.sum())
        low, high = excess.mean(axis=1) - 1.645 * error, excess.mean(axis=1) + 1.645 * error
    above = score - score[best]
    simplest = int(np.argmax(above <= error))
    return [
        Standing(m, float(score[i]), float(above[i]), float(error[i]), float(low[i]), float(high[i]), i == simplest)
        for i, m in enumerate(methods)
    ]


def cannot_be_told_apart(standings: Sequence[Standing]) -> str:
    """Say in a sentence which methods are as good as the best, as far as the stations can tell; empty where none is.

    >>> cannot_be_told_apart([Standing("kriging", 0.1, 0.0, 0.0, 0.0, 0.0, True)])
    ''
    """
    best = min(standings, key=lambda s: s.energy_score, default=None)
    others = [s.method.replace("_", " ") for s in standings if s is not best and not s.apart]
    if best is None or not others:
        return ""
    return f"{best.method.replace('_', ' ')} cannot be told apart from {', '.join(others)} on these stations"
