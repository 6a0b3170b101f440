"""What a cell of a numeric column says: numbers with their rounding, limits, traces, ranges, blanks."""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Sequence
from dataclasses import dataclass
from enum import IntEnum

import numpy as np
import numpy.typing as npt

from texture.stations.files import Cell
from texture.stations.where import Where, shown

__all__ = ["Numbers", "Reading", "read_numbers", "usual_decimals"]

FloatArray = npt.NDArray[np.float64]


class Reading(IntEnum):
    """How a cell was read. Everything from `MISSING` on deserves an audit row."""

    BLANK = 0
    PLAIN = 1
    MISSING = 2  # says in so many words that there is no value: nd, n/a, -, -999
    BELOW = 3  # <1: the value is the limit
    ABOVE = 4  # >95: the value is the limit
    TRACE = 5  # seen, too little to weigh
    RANGE = 6  # 5-10: the value is the middle, the half width half the range
    ABOUT = 7  # ~3
    MARKED = 8  # a number with a unit or footnote mark
    UNREADABLE = 9


@dataclass(frozen=True)
class Numbers:
    """A column read as numbers, in the unit of the sheet.

    Parameters
    ----------
    value : float array, shape (n,)
        NaN where there is none (blank, missing, trace, unreadable).
    reading : int8 array, shape (n,)
        A `Reading` for each cell.
    half_width : float array, shape (n,)
        Half of the last digit's step, or of a range; NaN where there is no value.
    percent_signs : int
        Number of cells that carry a percent sign.
    decimal_comma : bool
    """

    value: FloatArray
    reading: npt.NDArray[np.int8]
    half_width: FloatArray
    percent_signs: int = 0
    decimal_comma: bool = False


# fmt: off
_MISSING = frozenset((
    "-", "--", "---", "–", "—", ".", "..", "?", "*", "/", "x", "n/a", "na", "n.a.", "n.a", "nd", "n.d.", "n.d", "n/d", "nan", "null", "none",
    "nil", "#n/a", "s/d", "s.d.", "k.a.", "nv", "n.v.", "nm", "n.m.", "not measured", "not analysed", "not analyzed", "no data",
    "not determined", "not sampled", "missing", "no value", "sin datos", "keine angabe", "pas de donnees", "geen gegevens", "sem dados",
    "nessun dato", "#div/0!", "#value!", "#ref!", "#name?", "#num!", "#null!",
))
_TRACE = frozenset((
    "trace", "traces", "trace amount", "tr", "tr.", "trazas", "traza", "traccia", "tracce", "spur", "spuren", "sp.", "spoor", "vestigios",
    "vestígios", "bdl", "b.d.l.", "<dl", "< dl", "<lod", "< lod", "below detection", "below detection limit", "not detected",
))
# fmt: on
# Codes that stand for "no value" in old files; none can be a share, a depth or a position.
MISSING_CODES = (-9.0, -99.0, -999.0, -9999.0, -99999.0, -99.9, -999.9, -999.99, -999.25)

_NUMBER = r"[+\-]?(?:\d[\d.,' ]*|[.,]\d+)(?:[eE][+\-]?\d+)?"
_SIMPLE = re.compile(r"-?[0-9]+(?:\.[0-9]+)?")
_PLAIN = re.compile(r"[+\-]?(?:\d+(?:[.,]\d*)?|[.,]\d+)(?:[eE][+\-]?\d+)?")
_WHOLE = re.compile(_NUMBER)
_BELOW = re.compile(rf"(?:<|≤|<=|less than|under|below|menor que|kleiner als|inferieur a)\s*({_NUMBER})\s*%?")
_ABOVE = re.compile(rf"(?:>|≥|>=|more than|over|above|mayor que|groesser als|superieur a)\s*({_NUMBER})\s*%?")
_RANGE = re.compile(rf"({_NUMBER})\s*%?\s*(?:-|–|—|to|bis|\.\.\.?)\s*({_NUMBER})\s*%?")
_ABOUT = re.compile(
    rf"(?:~|≈|±|c\.|ca\.?|circa|approx\.?|about|etwa|aprox\.?|env\.?)\s*({_NUMBER})\s*%?|({_NUMBER})\s*%?\s*(?:\?|\(\?\))"
)
_PERCENT = re.compile(rf"({_NUMBER})\s*(?:%|percent|pct)")
_MARKED = re.compile(
    rf"\(?\s*({_NUMBER})\s*\)?\s*(?:[*†‡§#¹²³^]+\d?|\(?[a-e]\)|[a-e]|g|gr|gram|grams|cm|mm|m|metres|meters|ft|%\s*[*†‡§#]+)?\s*\)?"
)
_TOKEN = re.compile(r"\d[\d.,]*\d|[.,]\d+")


def read_numbers(cells: Sequence[Cell], where: Where, rows: Sequence[int], thousands: bool = False) -> Numbers:
    """Read a column of cells as numbers.

    Whether a comma is the decimal sign is decided once for the column. A cell that cannot be read does not
    stop the column: it is marked `UNREADABLE`.

    Parameters
    ----------
    cells : sequence of cells
    where : Where
        File, sheet and column, for messages.
    rows : sequence of int
        Row number of each cell.
    thousands : bool, default False
        Whether `512,340` may be read as five hundred thousand (metres of easting and northing).

    Raises
    ------
    SampleError
        If some cells use a comma and others a point as the decimal sign.

    Examples
    --------
    >>> read_numbers(["12,5", "<1", 7.25, "trace", ""], Where("a.csv"), range(2, 7)).value
    array([12.5 ,  1.  ,  7.25,   nan,   nan])
    """
    n = len(cells)
    value, half = np.full(n, np.nan), np.full(n, np.nan)
    reading = np.zeros(n, dtype=np.int8)
    decimals = np.full(n, -1, dtype=np.int16)
    comma, thousand_sign = _decimal_sign(cells, where, rows, thousands)
    seen: dict[str, tuple[float, int, float, int]] = {}
    percents = 0
    for i, cell in enumerate(cells):
        kind = type(cell)
        if kind is str:
            text: str = cell  # type: ignore[assignment]
            known = seen.get(text)
            if known is None:
                known = seen[text] = _read_text(text, comma, thousand_sign)
            value[i], reading[i], half[i], decimals[i] = known
            if known[1] and "%" in text:
                percents += 1
        elif kind is float or kind is int:
            value[i] = cell
            reading[i] = Reading.PLAIN
            decimals[i] = _decimals_of(cell)  # type: ignore[arg-type]
        elif cell is not None:
            reading[i] = Reading.UNREADABLE  # a date, a time, a truth value
    infinite = ~np.isfinite(value) & (reading == Reading.PLAIN)
    reading[infinite] = Reading.BLANK
    missing = (reading == Reading.PLAIN) & np.isin(value, MISSING_CODES)
    reading[missing] = Reading.MISSING
    value[missing | infinite] = np.nan
    exact = np.isfinite(value) & np.isnan(half)
    usual = usual_decimals(decimals[exact])
    half[exact] = 0.5 * 10.0 ** -np.maximum(decimals[exact], usual).astype(np.float64)
    return Numbers(value, reading, half, percents, comma)


def usual_decimals(decimals: npt.NDArray[np.int16]) -> int:
    """Digits after the point to which a column was typed.

    Spreadsheets drop trailing zeros: in a column of tenths, one value in ten looks whole. The answer is
    the largest number of digits that at least a fifth of the values have.

    >>> usual_decimals(np.array([1, 1, 0, 1, 1, 1], dtype=np.int16))
    1
    """
    if not len(decimals):
        return 0
    for digits in range(int(decimals.max()), 0, -1):
        if np.mean(decimals >= digits) >= 0.2:
            return digits
    return 0


def unreadable_hint(cell: Cell) -> str:
    """Words on why a cell is no number."""
    if isinstance(cell, (dt.date, dt.time)):
        return f"the date {cell}, to which spreadsheets turn entries such as 5-10"
    if isinstance(cell, bool):
        return f"the truth value {cell}"
    return shown(cell)


def _decimals_of(number: float) -> int:
    if float(number).is_integer():
        return 0
    text = f"{number:.9g}"  # beyond nine digits it is binary noise or a formula's result
    if "e" in text:
        return 6
    return min(len(text.partition(".")[2]), 6)


def _read_text(cell: str, comma: bool, thousand_sign: str) -> tuple[float, int, float, int]:
    """Return value, reading, half width (NaN: from the digits) and digits after the point."""
    if not comma and not thousand_sign and _SIMPLE.fullmatch(cell):  # most cells of most files
        return float(cell), Reading.PLAIN, np.nan, min(len(cell.partition(".")[2]), 9)
    text = cell.strip().replace("−", "-").replace("\xa0", " ").replace("\u202f", " ").lstrip("'").strip()
    if not text:
        return np.nan, Reading.BLANK, np.nan, -1
    if _PLAIN.fullmatch(text):
        return _plain(text, Reading.PLAIN, comma, thousand_sign)
    low = text.casefold()
    if low in _MISSING:
        return np.nan, Reading.MISSING, np.nan, -1
    if low in _TRACE:
        return np.nan, Reading.TRACE, np.nan, -1
    for pattern, reading in (
        (_WHOLE, Reading.PLAIN),
        (_PERCENT, Reading.PLAIN),
        (_BELOW, Reading.BELOW),
        (_ABOVE, Reading.ABOVE),
    ):
        if match := pattern.fullmatch(low):
            return _plain(match[1] if pattern.groups else match[0], reading, comma, thousand_sign)
    if match := _RANGE.fullmatch(low):
        low_end, high_end = (_plain(match[k], Reading.RANGE, comma, thousand_sign)[0] for k in (1, 2))
        if 0 <= low_end < high_end:
            return (low_end + high_end) / 2, Reading.RANGE, (high_end - low_end) / 2, -1
        return np.nan, Reading.UNREADABLE, np.nan, -1
    if match := _ABOUT.fullmatch(low):
        return _plain(match[1] or match[2], Reading.ABOUT, comma, thousand_sign)
    if match := _MARKED.fullmatch(low):
        return _plain(match[1], Reading.MARKED, comma, thousand_sign)
    return np.nan, Reading.UNREADABLE, np.nan, -1


def _plain(text: str, reading: Reading, comma: bool, thousand_sign: str) -> tuple[float, int, float, int]:
    text = text.replace(" ", "").replace("'", "")
    if thousand_sign:
        text = text.replace(thousand_sign, "")
    if comma:
        text = text.replace(",", ".")
    try:
        number = float(text)
    except ValueError:
        return np.nan, Reading.UNREADABLE, np.nan, -1
    digits, _, power = text.casefold().partition("e")
    decimals = len(digits.partition(".")[2]) - (int(power) if power else 0)
    return number, reading, np.nan, min(max(decimals, 0), 9)


def _decimal_sign(cells: Sequence[Cell], where: Where, rows: Sequence[int], thousands: bool) -> tuple[bool, str]:
    """Decide once for a column: whether the comma is the decimal sign, and the sign of thousands."""
    first: dict[str, int] = {}
    looked: set[str] = set()
    for i, cell in enumerate(cells):
        if type(cell) is not str or cell in looked or ("," not in cell and "." not in cell):
            continue
        looked.add(cell)
        for token in _TOKEN.findall(cell):
            sign = _sign_of(token)
            if sign:
                first.setdefault(sign, i)
    if "comma" in first and "point" in first:
        a, b = sorted((first["comma"], first["point"]))
        raise where.error(
            f"{shown(cells[a])} and in row {rows[b]} {shown(cells[b])}",
            "one decimal sign in the whole column",
            "make them agree",
            row=rows[a],
        )
    comma = "comma" in first or ("point" not in first and "comma?" in first and not thousands)
    doubt = "point?" if comma else "comma?"
    clear = "comma" if comma and "comma" in first else "comma?" if comma else "point" if "point" in first else "point?"
    if doubt in first and not thousands and clear in first:
        raise where.error(
            f"{shown(cells[first[clear]])} in row {rows[first[clear]]} and {shown(cells[first[doubt]])}",
            "one decimal sign in the whole column",
            "make them agree, or take out the signs of thousands",
            row=rows[first[doubt]],
        )
    if comma:
        return True, "."
    return False, "," if "comma?" in first or "commas" in first else ""


def _sign_of(token: str) -> str | None:
    """Name the decimal sign that a run of digits shows; a question mark where it may be the sign of thousands."""
    commas, points = token.count(","), token.count(".")
    if commas and points:
        return "comma" if token.rindex(",") > token.rindex(".") else "point"
    sign, count = (",", commas) if commas else (".", points)
    name, other = ("comma", "commas") if commas else ("point", "comma")
    if count == 0:
        return None
    if count > 1:
        return other if commas else "comma"  # 1,234,567 leaves the point as decimal sign, 1.234.567 the comma
    before, _, after = token.partition(sign)
    if len(after) == 3 and 1 <= len(before) <= 3 and not before.startswith("0"):
        return name + "?"
    return name
