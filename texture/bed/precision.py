"""Fractions that sum to one exactly in single precision."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from texture.bed.cells import Floats

__all__ = ["single_fractions"]

STEPS = 2**24
"""Multiples of 1 / STEPS between 0 and 1 are single-precision numbers, and so are their sums, in any order."""

CELLS_AT_ONCE = 100_000


def single_fractions(fraction: Floats) -> NDArray[np.float32]:
    """Round fractions to single precision so that each cell still sums to 1 exactly.

    Each is rounded down to a multiple of 2^-24; the steps left over go to the classes that lost most by it
    (largest remainder, the first of equals). No fraction moves by more than 2^-24, and none leaves 0 without
    having had mass.

    Parameters
    ----------
    fraction : float array, shape (k, …)
        Not negative; sums to 1 along the first axis within 1e-9. A cell with NaN stays NaN in all classes.

    Returns
    -------
    float32 array, shape (k, …)

    Examples
    --------
    >>> thirds = single_fractions(np.full((3, 1), 1 / 3))
    >>> (thirds[:, 0] * 2**24).tolist(), float(thirds.sum())
    ([5592406.0, 5592405.0, 5592405.0], 1.0)
    """
    flat = fraction.reshape(fraction.shape[0], -1)
    result = np.empty(flat.shape, dtype=np.float32)
    for start in range(0, flat.shape[1], CELLS_AT_ONCE):
        some = flat[:, start : start + CELLS_AT_ONCE]
        known = np.isfinite(some).all(axis=0)
        scaled = np.where(known, some, 0.0) * STEPS
        steps = np.floor(scaled)
        left = np.where(known, STEPS - steps.sum(axis=0), 0.0)
        rank = np.argsort(np.argsort(steps - scaled, axis=0, kind="stable"), axis=0, kind="stable")
        steps += rank < left
        result[:, start : start + CELLS_AT_ONCE] = np.where(known, steps / STEPS, np.nan)
    return result.reshape(fraction.shape)
