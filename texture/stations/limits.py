"""Cells that are not exact (`<1`, `>95`, `trace`, `5-10`, `~3`): a point to show, and the limits it lies between.

A limit stands for 0.65 of itself (Martín-Fernández et al. 2003), a trace for half the detection limit, a range for its middle.
Limits are what the row really says; the point is only what tables and maps of samples show.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from texture.stations.cells import Numbers, Reading

__all__ = ["ABOUT", "OF_LIMIT", "Part", "limit_rows", "move_within", "read_part"]

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

OF_LIMIT = 0.65  # share of a limit that stands for "below it" (Martín-Fernández et al. 2003)
OF_DETECTION = 0.5  # share of the detection limit that stands for "trace"
ABOUT = 0.2  # "~3": within a fifth of it, or of what is left to 1 (common practice, no source)


@dataclass(frozen=True)
class Part:
    """One part column in fractions, shape (n,) each.

    Parameters
    ----------
    value, low, high : float array
        Point and limits; limits are NaN where the cell is exact.
    half : float array
        Half width: rounding of exact cells, half the limits of the others.
    small : bool array
        Below a limit or a trace: keeps its value when the row is closed.
    """

    value: FloatArray
    low: FloatArray
    high: FloatArray
    half: FloatArray
    small: BoolArray

    def plus(self, other: Part) -> Part:
        """Sum of two parts; its limits are the sums of theirs wherever either has any."""
        inexact = np.isfinite(self.low) | np.isfinite(other.low)
        low, high = (
            np.where(
                inexact,
                _or(getattr(self, end), self.value) + _or(getattr(other, end), other.value),
                np.nan,
            )
            for end in ("low", "high")
        )
        return Part(
            self.value + other.value, low, np.minimum(high, 1.0), self.half + other.half, self.small & other.small
        )


def read_part(column: Numbers, divisor: float, detection_limit: float) -> Part:
    """Turn a column of numbers into fractions with their limits.

    Parameters
    ----------
    column : Numbers
    divisor : float
        What the column's unit has to be divided by.
    detection_limit : float
        Upper limit of a trace.
    """
    value, half = column.value / divisor, column.half_width / divisor
    low, high = np.full(len(value), np.nan), np.full(len(value), np.nan)
    below, above, trace, between, about = (
        column.reading == r for r in (Reading.BELOW, Reading.ABOVE, Reading.TRACE, Reading.RANGE, Reading.ABOUT)
    )
    about &= np.isfinite(value)
    width = np.maximum(half, ABOUT * np.minimum(value, np.abs(1.0 - value)))
    low = np.where(between, value - half, np.where(about, np.maximum(value - width, 0.0), low))
    high = np.where(between, value + half, np.where(about, value + width, high))
    half = np.where(about, width, half)
    low, high = np.where(below, 0.0, low), np.where(below, value, high)
    half, value = np.where(below, OF_LIMIT * value, half), np.where(below, OF_LIMIT * value, value)
    above &= value < 1.0
    low, high = np.where(above, value, low), np.where(above, 1.0, high)
    half, value = np.where(above, (1.0 - value) / 2, half), np.where(above, (1.0 + value) / 2, value)
    low, high = np.where(trace, 0.0, low), np.where(trace, detection_limit, high)
    value = np.where(trace, OF_DETECTION * detection_limit, value)
    half = np.where(trace, OF_DETECTION * detection_limit, half)
    return Part(value, low, high, half, below | trace)


def move_within(value: FloatArray, low: FloatArray, high: FloatArray, movable: BoolArray) -> BoolArray:
    """Move points within their limits, all by the same share of their room, so that rows come as near to 1 as they can.

    Parameters
    ----------
    value : float array, shape (n, 3)
        Changed in place.
    low, high : float array, shape (n, 3)
    movable : bool array, shape (n, 3)

    Returns
    -------
    moved : bool array, shape (n, 3)
    """
    rest = 1.0 - value.sum(axis=1)
    room = np.where(movable, np.where(rest[:, None] > 0.0, high - value, value - low), 0.0)
    whole = room.sum(axis=1)
    share = np.minimum(np.abs(rest) / np.where(whole > 0.0, whole, np.inf), 1.0)
    step = np.sign(rest)[:, None] * share[:, None] * room
    moved: BoolArray = np.isfinite(step) & (step != 0.0)
    value[moved] += step[moved]
    return moved


def limit_rows(
    value: FloatArray, low: FloatArray, high: FloatArray, half: FloatArray, small: BoolArray
) -> tuple[FloatArray, FloatArray]:
    """Limits of every known part of the rows in which any part is not exact; NaN in all other rows.

    An exact part lies within its rounding. Beside parts that are below a limit, and no other inexact ones, the exact parts
    make room together, so that their ratios stay: `<1`, 94, 5.5 is as much 0, 94.5, 5.5 as 1, 93.5, 5.5.

    Returns
    -------
    low, high : float array, shape (n, 3)
        The points lie between them, so that rows whose points sum to 1 can be met.
    """
    inexact = np.isfinite(low)
    rows: BoolArray = np.asarray(inexact.any(axis=1))
    known = np.isfinite(value)
    half = np.nan_to_num(half)
    lo, hi = _or(low, np.maximum(value - half, 0.0)), _or(high, value + half)
    only_small: BoolArray = rows & known.all(axis=1) & ~(inexact & ~small).any(axis=1)
    exact = known & ~inexact & only_small[:, None]
    taken = np.where(inexact, value, 0.0).sum(axis=1)
    most, least = np.where(inexact, high, 0.0).sum(axis=1), np.where(inexact, low, 0.0).sum(axis=1)
    left = np.where(taken < 1.0, 1.0 - taken, np.nan)[:, None]
    lo = np.where(exact, np.fmin(lo, value * (1.0 - np.minimum(most, 1.0))[:, None] / left), lo)
    hi = np.where(exact, np.fmax(hi, value * (1.0 - least)[:, None] / left), hi)
    lo, hi = np.clip(np.minimum(lo, value), 0.0, 1.0), np.clip(np.maximum(hi, value), 0.0, 1.0)
    told = rows[:, None] & known
    return np.where(told, lo, np.nan), np.where(told, hi, np.nan)


def _or(first: FloatArray, otherwise: FloatArray) -> FloatArray:
    return np.where(np.isfinite(first), first, otherwise)
