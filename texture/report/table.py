"""A table of the page: text in rows, and how numbers are written in it."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

__all__ = ["Table", "number"]


@dataclass(frozen=True)
class Table:
    """A table of text.

    Attributes
    ----------
    caption : str
    head : list of str
    rows : list of list of str
    numeric : list of int
        Columns set flush right.
    chosen : int
        The row that is the map's own; -1 for none.
    lead : int or None
        Rows that are shown at once; the others are folded away. None: all.
    """

    caption: str
    head: list[str]
    rows: list[list[str]]
    numeric: list[int] = field(default_factory=list)
    chosen: int = -1
    lead: int | None = None


def number(value: float, digits: int = 3) -> str:
    """Write a number for a person; a dash where there is none, and no sign on a zero.

    >>> number(-0.0001), number(-1234.5, 1), number(float("nan"))
    ('0.000', '−1,234.5', '–')
    """
    if not np.isfinite(value):
        return "–"
    text = f"{abs(value):,.{digits}f}"
    return f"−{text}" if value < 0.0 and any(c in text for c in "123456789") else text
