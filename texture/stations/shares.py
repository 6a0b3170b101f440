"""What the parts of a table's rows are, as fractions of 1, and the size classes they come from."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["Classes", "Shares", "no_shares"]

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]


@dataclass(frozen=True)
class Classes:
    """Amounts of adjoining size classes, one row for each sample.

    Parameters
    ----------
    limits_phi : float array, shape (k + 1,)
        Coarse to fine; open ends are infinite.
    amounts : float array, shape (n, k)
    known : bool array, shape (n,)
        Rows that a curve can be drawn of.
    """

    limits_phi: FloatArray
    amounts: FloatArray
    known: BoolArray


@dataclass(frozen=True)
class Shares:
    """Fractions of 1 for each row; NaN where a part is not known.

    Parameters
    ----------
    mud, sand, gravel : float array, shape (n,)
        Close to 1 where all three are known. Mud and sand without gravel are shares of what passed 2 mm.
    resolution : float array, shape (n,)
        Largest half width among the parts given: rounding, or half of a range.
    given : bool array, shape (n,)
        Whether the row gives any part at all, readable or not.
    problem : object array of str, shape (n,)
        Why the row cannot be used; empty where it can.
    low, high : float array, shape (n, 3)
        Limits of mud, sand and gravel in rows that are not exact; NaN in all others.
    notes : tuple of str
    classes : Classes, optional
        Size classes that the shares were made of, where they were.
    """

    mud: FloatArray
    sand: FloatArray
    gravel: FloatArray
    resolution: FloatArray
    given: BoolArray
    problem: npt.NDArray[np.object_]
    low: FloatArray
    high: FloatArray
    notes: tuple[str, ...] = ()
    classes: Classes | None = None


def no_shares(n: int) -> Shares:
    """Shares of a table that gives none, only words."""
    mud, sand, gravel, resolution = np.full((4, n), np.nan)
    low, high = np.full((2, n, 3), np.nan)
    return Shares(mud, sand, gravel, resolution, np.zeros(n, dtype=bool), np.full(n, "", dtype=object), low, high)
