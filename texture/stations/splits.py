"""Size classes that do not refer to the whole sample: weighed on a split of it, or given as percent of its sand."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from texture.stations.columns import Column
from texture.stations.files import Cell
from texture.stations.headings import unit_in
from texture.stations.sizes import SAME_LIMIT_PHI, SizeColumn, size_in
from texture.stations.tables import Table

__all__ = ["factor_of", "shares_of_sand", "split_factors"]

FloatArray = npt.NDArray[np.float64]
_RATIO = re.compile(r"\s*(\d+(?:[.,]\d+)?)\s*[/:]\s*(\d+(?:[.,]\d+)?)\s*")


def factor_of(cell: Cell) -> float:
    """Factor from a split to the whole; a share of it, such as 1/8 or 0.125, is turned over. NaN if it tells none.

    >>> [factor_of(c) for c in ("1/8", 0.25, 4, "1:2", "x")]
    [8.0, 4.0, 4.0, 2.0, nan]
    """
    if isinstance(cell, str) and (match := _RATIO.fullmatch(cell)):
        top, bottom = (float(match[k].replace(",", ".")) for k in (1, 2))
        value = top / bottom if bottom > 0.0 else math.nan
    elif isinstance(cell, str):
        text = cell.strip().lstrip("x×").replace(",", ".")
        value = float(text) if re.fullmatch(r"\d+(\.\d+)?", text) else math.nan
    else:
        value = float(cell) if isinstance(cell, (int, float)) and not isinstance(cell, bool) else math.nan
    if not value > 0.0:
        return math.nan
    return value if value >= 1.0 else 1.0 / value


def split_factors(
    table: Table,
    columns: Sequence[SizeColumn],
    split: Column,
    below_mm: float | None,
    problem: npt.NDArray[np.object_],
    notes: list[str],
) -> FloatArray:
    """What each amount has to be multiplied by, shape (n_rows, n_columns).

    Classes finer than the size at which the sample was split count times the factor. That size stands in the heading of the
    factor ("split factor < 2 mm") or in the recipe; rows whose factor is not 1 have a problem where neither tells it.
    """
    cells = table.columns[split.index]
    value = np.array([1.0 if c is None or c == "" else factor_of(c) for c in cells])
    for i in map(int, np.flatnonzero(np.isnan(value) & (problem == ""))):
        problem[i] = f'column "{split.heading}": {cells[i]!r} is no split factor such as 8 or 1/8'
    value = np.where(np.isnan(value), 1.0, value)
    size = size_in(split.heading, unit_in(split.heading))
    limit = -math.log2(below_mm) if below_mm is not None else size[0] if size is not None else math.nan
    factor = np.ones((len(value), len(columns)))
    if math.isnan(limit) or math.isinf(limit):
        for i in map(int, np.flatnonzero((value != 1.0) & (problem == ""))):
            problem[i] = f"a split factor of {value[i]:g}, and nothing says below which size; say split_below_mm"
        return factor
    coarsest = -math.inf
    for j, column in enumerate(columns):
        coarse = column.coarse_phi if column.meaning == "class" else coarsest  # a sieve's load passed the one above it
        if coarse >= limit - SAME_LIMIT_PHI:
            factor[:, j] = value
        coarsest = column.fine_phi if math.isfinite(column.fine_phi) else coarsest
    notes.append(f"{table.where.at(split.heading).text()}: classes below {2.0**-limit:.4g} mm times the split factor")
    return factor


def shares_of_sand(columns: Sequence[SizeColumn], amounts: FloatArray) -> None:
    """Turn classes given as percent of the sand into percent of the whole, in place: the sand is what the others leave."""
    of_sand = np.array([c.of_sand for c in columns])
    part = amounts[:, of_sand]
    whole = 100.0 if np.nanmax(part.sum(axis=1), initial=0.0) > 1.5 else 1.0
    rest = whole - amounts[:, ~of_sand].sum(axis=1)
    amounts[:, of_sand] = part * (rest / whole)[:, None]
