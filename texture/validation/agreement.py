"""Texture classes of held-out stations: which were taken for which."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Agreement", "class_agreement"]

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Agreement:
    """Measured against predicted classes.

    Attributes
    ----------
    codes : tuple of str
        Classes that were measured or predicted, in the scheme's order.
    confusion : int array, shape (c, c)
        Stations by measured (row) and predicted (column) class.
    measured, predicted : int arrays, shape (n,)
        Place of each station's class in `codes`; -1 where a part is unknown.
    """

    codes: tuple[str, ...]
    confusion: NDArray[np.int64]
    measured: NDArray[np.int64]
    predicted: NDArray[np.int64]

    def share(self, weights: Floats) -> Floats:
        """Weighted share of the stations whose class is predicted, shape (w,); NaN without any."""
        known = self.measured >= 0
        kept = weights[:, known]
        total = kept.sum(axis=1)
        right = kept @ (self.measured == self.predicted)[known].astype(np.float64)
        return np.asarray(np.divide(right, total, out=np.full_like(total, np.nan), where=total > 0.0))

    def kappa(self, weights: Floats) -> Floats:
        """Cohen's (1960) kappa, shape (w,): agreement beyond that of chance; NaN where chance alone agrees fully."""
        known = self.measured >= 0
        kept = weights[:, known]
        total = kept.sum(axis=1, keepdims=True)
        kept = np.divide(kept, total, out=np.zeros_like(kept), where=total > 0.0)
        classes = np.arange(len(self.codes))
        margins = [kept @ (c[known][:, None] == classes).astype(np.float64) for c in (self.measured, self.predicted)]
        chance = (margins[0] * margins[1]).sum(axis=1)
        agreed = self.share(weights)
        beyond = np.full_like(chance, np.nan)
        return np.asarray(np.divide(agreed - chance, 1.0 - chance, out=beyond, where=chance < 1.0 - 1e-12))


def class_agreement(observed: Floats, predicted: Floats, scheme: str, trace: float) -> Agreement:
    """Class fully known rows by measured and predicted fractions, shape (n, parts), with one trace for both."""
    from texture.composition import classify, find_scheme

    known = np.isfinite(observed).all(axis=1) & np.isfinite(predicted).all(axis=1)
    classes = [classify(f[known], scheme, trace=trace) for f in (observed, predicted)]
    codes = tuple(code for code in find_scheme(scheme).codes if any((c == code).any() for c in classes))
    place = {code: i for i, code in enumerate(codes)}
    numbers = [np.full(len(observed), -1, dtype=np.int64) for _ in classes]
    for number, found in zip(numbers, classes, strict=True):
        number[known] = [place[str(code)] for code in found]
    confusion = np.zeros((len(codes), len(codes)), dtype=np.int64)
    np.add.at(confusion, (numbers[0][known], numbers[1][known]), 1)
    return Agreement(codes, confusion, *numbers)
