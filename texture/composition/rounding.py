"""Noise variance that rounding and small parts give coordinates, by the delta method."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from texture.composition.closure import Array
from texture.composition.zeros import REPLACEMENT_RATIO, replace

if TYPE_CHECKING:
    from texture.composition.logratio import LogRatio

__all__ = ["rounding_noise"]


def rounding_noise(logratio: LogRatio, rows: Array, pairs: Sequence[tuple[Array, Array]], step: Array) -> Array:
    """Variance of each coordinate, shape (n, D - 1); NaN where it is.

    Parameters
    ----------
    logratio : LogRatio
    rows : float array, shape (n, D)
        Closed, before replacement.
    pairs : sequence of (numerator, denominator), each of shape (n,)
        Both sides of each split, after replacement.
    step : float array, shape (n,)
        Rounding step of each row.
    """
    limit = logratio.detection_limit

    def error_variance(side: Array) -> Array:
        # A replaced side is known to the limit at best, however fine the digits.
        return np.asarray(np.where(side <= REPLACEMENT_RATIO * limit, np.maximum(step, limit), step) ** 2 / 12.0)

    noise = np.empty((len(rows), logratio.n_coordinates))
    replaced = None if logratio.amalgamates else replace(rows, limit)
    for i, (top, bottom) in enumerate(pairs):
        if logratio.kind == "shares":
            total = top + bottom
            variance = (error_variance(top) * bottom**2 + error_variance(bottom) * top**2) / total**4
            # A share lies in [0, 1]: no error is wider than a uniform guess.
            noise[:, i] = np.minimum(variance, 1.0 / 12.0)
        elif replaced is None:
            noise[:, i] = error_variance(top) / top**2 + error_variance(bottom) / bottom**2
        else:
            # The same sum over parts, each weighted with its coefficient in the coordinate.
            noise[:, i] = np.where(np.isnan(top) | np.isnan(bottom), np.nan, 0.0)
            for j in (*logratio.splits[i].numerator, *logratio.splits[i].denominator):
                weight = logratio.partition.balance_basis()[i, j] if logratio.kind == "ilr" else 1.0
                noise[:, i] += weight**2 * error_variance(replaced[:, j]) / replaced[:, j] ** 2
    return noise
