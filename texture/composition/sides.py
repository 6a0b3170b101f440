"""Rows of fractions and the two sides of each split, before logarithms: what is unknown, filled or replaced.

`Split` says which columns stand on which side. Sides are sums of parts (amalgamation), or geometric means.
"""

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array, check_parts
from texture.composition.partition import Split
from texture.composition.zeros import replace, replace_pair
from texture.errors import CompositionError

__all__ = ["closed_rows", "mean_sides", "refuse_zero_sides", "side_total", "sum_sides"]

PARTIAL_SUM_TOLERANCE = 0.02
"""Known parts of an incomplete row may exceed 1 by this much (rounding), not more."""


def closed_rows(fractions: npt.ArrayLike, n_parts: int) -> tuple[Array, tuple[int, ...]]:
    """Closed complete rows, filled partial rows, flattened to 2-D, with the leading shape."""
    array = check_parts(fractions, n_parts=n_parts)
    rows = array.reshape(-1, n_parts)
    sums = rows.sum(axis=1)
    partial = np.isnan(sums)
    if (sums == 0).any():
        row = int(np.argmax(sums == 0))
        raise CompositionError(f"row {row} (counted from 0): all parts are zero, expected one above zero")
    # Rows that sum to 1 to the last few bits are left alone, so that fractions come back as they were.
    rows = rows / np.where(partial | (np.abs(sums - 1.0) < 4e-16), 1.0, sums)[:, None]
    if partial.any():
        _fill(rows, np.flatnonzero(partial))
    return rows, array.shape[:-1]


def _fill(rows: Array, partial: npt.NDArray[np.intp]) -> None:
    """Check incomplete rows; a single unknown part is what the others leave."""
    some = rows[partial]
    known = np.nansum(some, axis=1)
    if (known > 1.0 + PARTIAL_SUM_TOLERANCE).any():
        worst = int(np.argmax(known > 1.0 + PARTIAL_SUM_TOLERANCE))
        raise CompositionError(
            f"row {int(partial[worst])} (counted from 0): known parts sum to {known[worst]:.6g}, expected at most "
            "1; a row with unknown parts must be in fractions of the whole sample"
        )
    unknown = np.isnan(some)
    single = unknown.sum(axis=1) == 1
    left = np.broadcast_to(np.maximum(1.0 - known, 0.0)[:, None], some.shape)
    rows[partial] = np.where(unknown & single[:, None], left, some)


def sum_sides(rows: Array, splits: Sequence[Split], limit: float) -> list[tuple[Array, Array]]:
    """Sums of both sides of every split, what is below the limit replaced; NaN where unknown."""
    return [replace_pair(side_total(rows, s.numerator), side_total(rows, s.denominator), limit) for s in splits]


def mean_sides(rows: Array, splits: Sequence[Split], limit: float) -> list[tuple[Array, Array]]:
    """Geometric means of both sides of every split, of parts after replacement; NaN where unknown."""
    replaced = replace(rows, limit)
    pairs = []
    for s in splits:
        top = _geometric_mean(replaced, s.numerator)
        bottom = _geometric_mean(replaced, s.denominator)
        unknown = (side_total(rows, s.numerator) < limit) & (side_total(rows, s.denominator) < limit)
        pairs.append((np.where(unknown, np.nan, top), np.where(unknown, np.nan, bottom)))
    return pairs


def refuse_zero_sides(pairs: Sequence[tuple[Array, Array]]) -> None:
    """Raise for the first row with a side of zero, which has no logarithm."""
    for top, bottom in pairs:
        if ((top == 0) | (bottom == 0)).any():
            row = int(np.argmax((top == 0) | (bottom == 0)))
            raise CompositionError(
                f"row {row} (counted from 0): a part is zero, expected positive parts since "
                "detection_limit = 0; give a detection limit"
            )


def side_total(rows: Array, columns: tuple[int, ...]) -> Array:
    """Sum of columns; where one of them is unknown, 1 minus all others if those are known."""
    total = rows[:, columns[0]].copy()
    for j in columns[1:]:
        total += rows[:, j]
    missing = np.flatnonzero(np.isnan(total))
    if len(missing):
        outside = [j for j in range(rows.shape[1]) if j not in columns]
        total[missing] = np.maximum(1.0 - rows[missing][:, outside].sum(axis=1), 0.0)
    return total


def _geometric_mean(rows: Array, columns: tuple[int, ...]) -> Array:
    if len(columns) == 1:
        return rows[:, columns[0]].copy()
    with np.errstate(divide="ignore"):  # a zero part gives a zero mean, refused later
        return np.asarray(np.exp(np.log(rows[:, list(columns)]).mean(axis=1)))
