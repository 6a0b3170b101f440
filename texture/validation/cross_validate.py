"""Hold stations out fold by fold, predict them, and keep every prediction beside what was measured."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from texture.validation.folds import Folds
from texture.validation.scores import score_table

__all__ = ["HeldOut", "cross_validate"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Predict = Callable[[Ints, Ints], tuple[Floats, Floats]]


@dataclass(frozen=True, eq=False)
class HeldOut:
    """Held-out predictions of one method.

    Attributes
    ----------
    method : str
    predicted : float array, shape (n, parts)
        Expected fractions of each station when it was held out.
    low, high : float arrays, shape (n, parts)
        Ends of the 90 % interval of a sample; NaN where the method has none.
    scores : list of dict
        See `texture.validation.scores.score_table`.
    """

    method: str
    predicted: Floats
    low: Floats
    high: Floats
    scores: list[dict[str, str | float]]

    def score(self, part: str, name: str) -> float:
        """Return one score, NaN where it was not made."""
        return next((float(s["value"]) for s in self.scores if s["part"] == part and s["score"] == name), np.nan)

    def __repr__(self) -> str:
        rmse = {str(s["part"]): s["value"] for s in self.scores if s["score"] == "rmse"}
        return f"<HeldOut {self.method}: RMSE {', '.join(f'{part} {value:.3f}' for part, value in rmse.items())}>"


def cross_validate(
    method: str,
    parts: tuple[str, ...],
    observed: Floats,
    scored: NDArray[np.bool_],
    folds: Folds,
    predict: Predict,
    limit: float,
    advance: Callable[[int], None] = lambda steps: None,
) -> HeldOut:
    """Run one method over all folds.

    Parameters
    ----------
    method : str
        Name, for the tables.
    parts : tuple of str
    observed : float array, shape (n, parts)
        Measured fractions, NaN where unknown.
    scored : bool array, shape (n,)
        Stations that count in the scores; the others train and are predicted all the same.
    folds : Folds
    predict : callable
        (train, test) index arrays → expected fractions, shape (t, parts), and their 90 % interval, shape (2, t, parts).
        It must refit whatever learns from fractions.
    limit : float
        Detection limit, see `score_table`.
    advance : callable
        Called with 1 after each fold.
    """
    predicted = np.full(observed.shape, np.nan)
    low, high = predicted.copy(), predicted.copy()
    for train, test in folds.pairs():
        predicted[test], (low[test], high[test]) = predict(train, test)
        advance(1)
    measured = np.where(scored[:, None], observed, np.nan)
    return HeldOut(method, predicted, low, high, score_table(parts, measured, predicted, low, high, limit))
