"""Held-out error chooses among the treatments of zeros, and says what the choice itself is worth."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition.unseen import Unseen, unseen_below
from texture.treatments import Censor, Presence, Shares, Treatment

if TYPE_CHECKING:
    from texture.validation.held_out import HeldOut

__all__ = ["Choice", "Tried", "choose"]

Floats = NDArray[np.float64]
MOST_MEAN_ERROR = 0.1  # of a part's mean: a map that is further off has too much or too little of it overall
BLIND_FOLDS = 10  # the choice is made again without each of so many groups of folds


@dataclass(frozen=True, eq=False)
class Tried:
    """One treatment's record in the comparison.

    Attributes
    ----------
    treatment : Treatment
    held_out : HeldOut
    error : float
        Sum over parts of the mean squared error relative to the part's variance; lower is better, and their plain
        means would score the number of parts.
    above_best : float
        How much `error` lies above that of the best candidate.
    standard_error : float
        Of `above_best`, from the differences station by station.
    balanced : bool
        Whether the mean error of every part is within a tenth of the part's mean, what lies below the limit included.
    chosen : bool
    """

    treatment: Treatment
    held_out: HeldOut
    error: float
    above_best: float
    standard_error: float
    balanced: bool
    chosen: bool


@dataclass(frozen=True, eq=False)
class Choice:
    """The comparison of treatments and its outcome.

    Attributes
    ----------
    tried : list of Tried
        One of which is chosen.
    unseen : list of Unseen
        For each part, what its values below the laboratory's limit were taken to be.
    blind_error : float
        Error of choosing: as `Tried.error`, each station predicted by the treatment that would have been chosen
        without its fold. The chosen treatment's own error was picked for being low, and is too good by about the difference.
    """

    tried: list[Tried]
    unseen: list[Unseen]
    blind_error: float

    @property
    def chosen(self) -> Tried:
        """The record of the treatment that the map takes."""
        return next(t for t in self.tried if t.chosen)


def choose(
    treatments: Sequence[Treatment],
    held_out: Sequence[HeldOut],
    measured: Floats,
    limit: float,
    folds: NDArray[np.int64] | None = None,
) -> Choice:
    """Compare treatments, the plain one first where it is among them, and mark the one to take.

    The lowest error among those whose mean errors are balanced (among all where none is) is the best, and those within one
    standard error of it are as good as it (Breiman et al. 1984, section 3.4.3). Of these the plain one is taken; then the one
    whose assumption what was measured speaks for: presence where zeros are absence, censoring where they are the rest of
    small values; then the others, shares last: they know none of the limits, and a normal distribution of a share reaches beyond 0 and 1.

    A part's true mean is that of what was measured with what lies below the limit put at its `unseen_below` mean. Where that
    cannot be told, any mean between zeros at 0 and zeros at the limit has no error.

    Parameters
    ----------
    treatments : sequence of Treatment
    held_out : sequence of HeldOut
        On the same folds.
    measured : float array, shape (n, parts)
        NaN where a part is unknown or not to be scored.
    limit : float
        The laboratory's.
    folds : int array, shape (n,), optional
        Fold of each station; without them the choice is not judged (`Choice.blind_error` is NaN).
    """
    unseen = [unseen_below(column, limit) for column in measured.T]
    shares = np.column_stack([_relative_errors(h.predicted, measured) for h in held_out])
    taken, best, balanced = _take(
        treatments, held_out, measured, limit, unseen, shares, np.ones(len(measured), dtype=bool)
    )
    error, spread = shares.sum(axis=0), _standard_errors(shares, best)
    tried = [
        Tried(t, held_out[i], float(error[i]), float(error[i] - error[best]), spread[i], balanced[i], i == taken)
        for i, t in enumerate(treatments)
    ]
    blind = np.nan
    if folds is not None:
        blind, groups = 0.0, folds % BLIND_FOLDS
        for group in np.unique(groups):
            kept = groups != group
            picked, _, _ = _take(treatments, held_out, measured, limit, unseen, shares, kept)
            blind += float(shares[~kept, picked].sum())
    return Choice(tried, unseen, blind)


def _take(
    treatments: Sequence[Treatment],
    held_out: Sequence[HeldOut],
    measured: Floats,
    limit: float,
    unseen: list[Unseen],
    shares: Floats,
    kept: NDArray[np.bool_],
) -> tuple[int, int, list[bool]]:
    """Numbers of the treatment to take and of the best, and which are balanced, by some of the stations."""
    balanced = [_balanced(h.predicted[kept], measured[kept], limit, unseen) for h in held_out]
    open_to = [i for i in range(len(treatments)) if balanced[i] or not any(balanced)]
    error = shares[kept].sum(axis=0)
    best = min(open_to, key=lambda i: error[i])
    spread = _standard_errors(shares[kept], best)
    near = [i for i in open_to if error[i] - error[best] <= spread[i]]
    absent = any(u.absent for u in unseen)
    return min(near, key=lambda i: _rank(treatments[i], absent, i)), best, balanced


def _rank(treatment: Treatment, absent: bool, place: int) -> tuple[int, int]:
    """Order of preference among treatments that are as good as each other."""
    if place == 0:
        return 0, place
    order = (Presence,) if absent else (Censor, Presence)
    for rank, kind in enumerate(order, start=1):
        if isinstance(treatment, kind):
            return rank, place
    if isinstance(treatment, Shares):
        return 5, place
    return (4 if isinstance(treatment, Censor) else 3), place


def _standard_errors(shares: Floats, best: int) -> list[float]:
    """Of the differences in error from the best, from the differences station by station."""
    return [float(np.sqrt(len(shares)) * (column - shares[:, best]).std()) for column in shares.T]


def _relative_errors(predicted: Floats, measured: Floats) -> Floats:
    """Each station's share in the sum over parts of the mean squared error relative to the part's variance, shape (n,)."""
    share = np.zeros(len(measured))
    for part in range(measured.shape[1]):
        known = np.isfinite(measured[:, part])
        spread = float(measured[known, part].var()) if known.any() else 0.0
        if spread > 0.0:
            share[known] += (predicted[known, part] - measured[known, part]) ** 2 / spread / known.sum()
    return share


def _balanced(predicted: Floats, measured: Floats, limit: float, unseen: list[Unseen]) -> bool:
    for part, below in enumerate(unseen):
        known = np.isfinite(measured[:, part])
        if not known.any():
            continue
        value, mean = measured[known, part], float(predicted[known, part].mean())
        told = not np.isnan(below.mean)
        least, most = (
            float(np.where(value < limit, v, value).mean())
            for v in ((below.mean, below.mean) if told else (value, limit))
        )
        if not (1.0 - MOST_MEAN_ERROR) * least <= mean <= (1.0 + MOST_MEAN_ERROR) * most:
            return False
    return True
