"""Sampling dates as ISO 8601 text: spreadsheet dates, and text dates with one order for the whole column."""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from texture.stations.files import Cell, is_blank
from texture.stations.where import Where, shown

__all__ = ["read_dates"]

_ISO = re.compile(r"(\d{4})[-/.](\d{1,2})(?:[-/.](\d{1,2}))?(?:[T ].*)?")
_COMPACT = re.compile(r"(1[89]|20)\d{6}")
_NUMBERS = re.compile(r"(\d{1,2})[-/. ](\d{1,2})[-/. ](\d{4}|\d{2})(?:[T ,].*)?")
_WORDS = re.compile(
    r"(\d{1,2})(?:st|nd|rd|th|\.)?[-/. ]*(?:de )?([^\W\d]{3,12})\.?,?[-/. ]*(?:de )?(\d{4}|\d{2})(?:[T ,].*)?", re.I
)
_WORDS_US = re.compile(r"([^\W\d]{3,12})\.? (\d{1,2})(?:st|nd|rd|th)?,? (\d{4})", re.I)
_YEAR = re.compile(r"(1[89]|20)\d{2}")
_MONTHS = {
    prefix: month
    for month, prefixes in enumerate(
        ("jan ene gen", "feb fev fév", "mar mär mrt maa mae", "apr abr avr", "may mai mag mei", "jun jui giu", "jul juil lug", "aug ago aoû aou", "sep set", "oct okt ott out", "nov", "dec dez dic déc dec"),
        start=1,
    )
    for prefix in prefixes.split()
}  # fmt: skip


def read_dates(cells: Sequence[Cell], where: Where) -> tuple[npt.NDArray[np.object_], tuple[str, ...]]:
    """Read a column of dates.

    The order of day and month is decided once: by a number above 12 somewhere in the column. If nothing
    decides it, or both orders occur, such dates stay blank and a note says so.

    Returns
    -------
    dates : object array of str, shape (n,)
        ISO dates, a year alone where no more is given, empty where there is none.
    notes : tuple of str

    Examples
    --------
    >>> read_dates(["17/05/1987", "1987-06-02", 1987, ""], Where("a.csv"))[0].tolist()
    ['1987-05-17', '1987-06-02', '1987', '']
    """
    distinct: dict[tuple[type, Cell], str | tuple[int, int, int] | None] = {}
    for cell in cells:
        key = (type(cell), cell)
        if key not in distinct:
            distinct[key] = _one(cell)
    pairs = [(v, key[1]) for key, v in distinct.items() if isinstance(v, tuple)]
    day_first = [shown(c) for (a, b, _), c in pairs if a > 12 >= b]
    month_first = [shown(c) for (a, b, _), c in pairs if b > 12 >= a]
    notes: list[str] = []
    order = "day" if day_first and not month_first else "month" if month_first and not day_first else ""
    if pairs and not order:
        found = f"{day_first[0]} and {month_first[0]}" if day_first and month_first else f"{shown(pairs[0][1])}"
        notes.append(
            f"{where.text()}: the order of day and month cannot be told from {found}; these dates are left blank"
        )
    unreadable = [shown(key[1]) for key, v in distinct.items() if v is None and not is_blank(key[1])]
    if unreadable:
        notes.append(
            f"{where.text()}: {len(unreadable)} different entries are no dates and are left blank, such as {unreadable[0]}"
        )

    def text(v: str | tuple[int, int, int] | None) -> str:
        if isinstance(v, tuple):
            a, b, year = v
            if not order and a != b:
                return ""
            return _iso(year, b if order != "month" else a, a if order != "month" else b)
        return v or ""

    ready = {key: text(v) for key, v in distinct.items()}
    return np.array([ready[(type(c), c)] for c in cells], dtype=object), tuple(notes)


def _one(cell: Cell) -> str | tuple[int, int, int] | None:
    """ISO text, or (first, second, year) where the order is open, or None."""
    if isinstance(cell, dt.datetime):
        return cell.date().isoformat()
    if isinstance(cell, dt.date):
        return cell.isoformat()
    if isinstance(cell, bool) or is_blank(cell):
        return None
    if isinstance(cell, (int, float)):
        if not float(cell).is_integer():
            return None
        cell = str(int(cell))
    if not isinstance(cell, str):
        return None
    text = cell.strip()
    if match := _ISO.fullmatch(text):
        return _iso(int(match[1]), int(match[2]), int(match[3]) if match[3] else None) or None
    if _COMPACT.fullmatch(text):
        return _iso(int(text[:4]), int(text[4:6]), int(text[6:])) or None
    if _YEAR.fullmatch(text):
        return text
    if match := _NUMBERS.fullmatch(text):
        return int(match[1]), int(match[2]), _full_year(match[3])
    if match := _WORDS.fullmatch(text):
        month = _month(match[2])
        return (_iso(_full_year(match[3]), month, int(match[1])) or None) if month else None
    if match := _WORDS_US.fullmatch(text):
        month = _month(match[1])
        return (_iso(int(match[3]), month, int(match[2])) or None) if month else None
    return None


def _month(word: str) -> int | None:
    low = word.casefold()
    return _MONTHS.get(low[:4]) or _MONTHS.get(low[:3])


def _full_year(text: str) -> int:
    """Two digits up to 49 are of this century, the others of the last."""
    year = int(text)
    if len(text) == 4:
        return year
    return year + (2000 if year < 50 else 1900)


def _iso(year: int, month: int, day: int | None) -> str:
    try:
        return dt.date(year, month, day or 1).isoformat()[: 10 if day else 7]
    except ValueError:
        return ""
