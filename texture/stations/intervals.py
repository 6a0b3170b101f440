"""Depth intervals below the surface of the bed, as sample sheets write them."""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from texture.stations.files import Cell, is_blank

__all__ = ["parse_interval", "read_intervals"]

_N = r"(\d+(?:[.,]\d+)?)"
_RANGE = re.compile(rf"{_N}\s*(mm|cm|m)?\s*(?:-|–|to|/|bis|a)\s*{_N}(?:\s*-\s*{_N})?\s*(mm|cm|m)?")
_SURFACE = re.compile(r"\b(surface|surficial|top|grab|oberfl\w+|superfici\w*|surfac\w*|oppervlak\w*)\b", re.I)
METRES = {"mm": 0.001, "cm": 0.01, "m": 1.0}


def parse_interval(text: str, unit: str | None) -> tuple[float, float] | None:
    """Return top and bottom in metres, or None if the text tells no interval.

    Parameters
    ----------
    text : str
    unit : {"mm", "cm", "m"} or None
        Unit of the column, for texts that carry none; without any unit there is no interval.

    Examples
    --------
    >>> parse_interval("0-2cm", None), parse_interval("0 to 2-3 cm", None), parse_interval("surface?", None)
    ((0.0, 0.02), (0.0, 0.03), (0.0, nan))
    """
    low = " ".join(text.casefold().split())
    if match := _RANGE.search(low):
        own = match[5] or match[2] or unit
        if own not in METRES:
            return None
        ends = [float(match[k].replace(",", ".")) * METRES[own] for k in (1, 3, 4) if match[k]]
        return min(ends), round(max(ends), 9)
    if _SURFACE.search(low):
        return 0.0, float("nan")
    return None


def read_intervals(
    cells: Sequence[Cell], unit: str | None
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64], list[int]]:
    """Read a column of intervals.

    Returns
    -------
    top, bottom : float arrays, metres below the surface of the bed; NaN where unknown
    unread : list of int
        Numbers of the cells that say something else.
    """
    top, bottom = np.full(len(cells), np.nan), np.full(len(cells), np.nan)
    unread: list[int] = []
    for i, cell in enumerate(cells):
        if is_blank(cell):
            continue
        found = parse_interval(cell, unit) if isinstance(cell, str) else None
        if found is None:
            unread.append(i)
        else:
            top[i], bottom[i] = found
    return top, bottom, unread
