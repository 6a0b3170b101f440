"""Columns that are classes of grain size: their limits from headings in phi, mm or µm.

phi = -log2(diameter / 1 mm) (Krumbein 1934); larger phi is finer.
"""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

from texture.stations.files import Cell, is_blank
from texture.stations.headings import is_tare, is_weight, plain, unit_in
from texture.stations.where import Where

__all__ = ["SizeColumn", "count_sizes", "is_pan", "is_size_header", "scale_unit", "size_columns", "size_in"]

FEWEST = 3  # columns; with fewer, headings such as "<63 µm" are parts by themselves
SAME_LIMIT_PHI = 0.03  # 62.5 and 63 µm are 0.012 apart, 60 and 62.5 µm 0.06

_N = r"(-?\d+(?:[.,]\d+)?)"
_U = r"(phi|mm|um)?"
_BETWEEN = re.compile(rf"(?<![\d.]){_N}\s*{_U}\s*(?:to|-|–|a|bis|and)\s*{_N}\s*{_U}(?![\d.])")
_LESS = re.compile(rf"(?:<=?|≤|less than|finer than|under|below|smaller than)\s*{_N}\s*{_U}")
_MORE = re.compile(rf"(?:>=?|≥|more than|coarser than|over|above|larger than|greater than)\s*{_N}\s*{_U}")
_SINGLE = re.compile(rf"(?:phi)?\s*{_N}\s*{_U}")
_SCALE = re.compile(
    r"\b(size|sieve|sieves|diameter|aperture|mesh|grain|phi|korngro(e|s)\w*|sieb\w*|maschenweite|tamiz|tamices|tamis|maille|malla|zeef\w*|peneira|setaccio|vaglio|luz)\b"
)
_PAN = re.compile(r"\b(pan|finest|rest|residue|bottom pan|passing last)\b")
_FINER = re.compile(r"\b(passing|finer|undersize|cum\w* (finer|passing)|durchgang|passant)\b")
_COARSER = re.compile(r"\b(cum\w*( \S+){0,3} retained|retained( \S+)? cum\w*|oversize|coarser)\b")
_CUMULATIVE = re.compile(r"\b(cum|cumul\w*|acum\w*|kumul\w*|summenkurve)\b")
_OF_SAND = re.compile(r"\b(of|von|de la|du|del) (the )?(sand|total sand|sand fraction|arena|sable|sandes)\b")
_NO_SIZE = re.compile(
    r"\b(depth|interval|top|bottom|date|lat\w*|lon\w*|d\d\d|median|mean|sorting|skew\w*|kurt\w*|percentile|core|layer|sample|temperature|station)\b"
)


@dataclass(frozen=True)
class SizeColumn:
    """One column of a size analysis.

    Parameters
    ----------
    index : int
        Column number from 0.
    heading : str
    coarse_phi, fine_phi : float
        Limits of the class; -inf and inf where it is open. For a single size both are that size.
    meaning : {"class", "single", "pan", "finer", "coarser", "cumulative"}
        Cumulative where the heading does not say from which end.
    tare : int
        Number of the column whose weights have to be taken off, -1 if there is none.
    of_sand : bool
        Whether its amounts are shares of the sand rather than of the whole.
    """

    index: int
    heading: str
    coarse_phi: float
    fine_phi: float
    meaning: str
    tare: int = -1
    of_sand: bool = False


def size_in(text: str, unit: str | None) -> tuple[float, float, str] | None:
    """Return coarse limit, fine limit (both phi) and meaning of a size heading, or None.

    >>> size_in("-1 to 0", "phi"), size_in("< 0.0625 mm", None), size_in("62.5-125 µm", None)
    ((-1.0, 0.0, 'class'), (4.0, inf, 'class'), (3.0, 4.0, 'class'))
    """
    words = plain(text)
    if _NO_SIZE.search(words):
        return None
    if match := _BETWEEN.search(words):
        a, b = _phi(match[1], match[2] or match[4] or unit), _phi(match[3], match[4] or match[2] or unit)
        return None if a is None or b is None or a == b else (min(a, b), max(a, b), "class")
    for pattern, finer in ((_LESS, True), (_MORE, False)):
        if match := pattern.search(words):
            own = match[2] or unit
            limit = _phi(match[1], own)
            if limit is None:
                return None
            open_below = finer is (own != "phi")  # "less than 4 phi" is coarser than 4 phi
            return (limit, math.inf, "class") if open_below else (-math.inf, limit, "class")
    if _PAN.search(words):
        return math.nan, math.inf, "pan"
    if match := _SINGLE.search(words):
        limit = _phi(match[1], match[2] or unit)
        if limit is not None:
            return limit, limit, "single"
    return None


def count_sizes(row: Iterable[Cell]) -> int:
    """Number of cells of one row that are size headings beyond doubt: classes, or sizes with their unit.

    >>> count_sizes(["Sample", "< -4", "-4 to -3", "> 9", 12.5, "2 mm"])
    4
    """
    found = 0
    for cell in row:
        if isinstance(cell, str) and 0 < len(cell) <= 60 and any(ch.isdigit() for ch in cell):
            size = size_in(cell, "phi" if unit_in(cell) not in ("mm", "um") else None)
            found += size is not None and (size[2] == "class" or unit_in(cell) in ("phi", "mm", "um"))
    return found


def is_size_header(row: Sequence[Cell]) -> bool:
    """Whether a row is a scale of bare sizes led by a word with their unit: "Sieve (mm)", 4, 2, 1, 0.5.

    >>> is_size_header(["Size, mm", 4, 2, 1, "0.5", "pan"]), is_size_header(["S1", 4, 2, 1, 0.5])
    (True, False)
    """
    filled = [c for c in row if not is_blank(c)]
    if not filled or not isinstance(filled[0], str) or scale_unit([filled[0]]) is None:
        return False
    numbers = [n for n in map(_number, filled[1:]) if n is not None]
    steps = [b - a for a, b in itertools.pairwise(numbers)]
    return len(numbers) >= FEWEST and (all(s > 0 for s in steps) or all(s < 0 for s in steps))


def is_pan(text: str) -> bool:
    """Whether a heading names what passed the last sieve.

    >>> is_pan("Pan"), is_pan("2 mm")
    (True, False)
    """
    return bool(_PAN.search(plain(text)))


def _number(cell: Cell) -> float | None:
    if isinstance(cell, (int, float)) and not isinstance(cell, bool):
        return float(cell)
    if isinstance(cell, str) and re.fullmatch(_N, cell.strip()):
        return float(cell.strip().replace(",", "."))
    return None


def scale_unit(headings: Iterable[str]) -> str | None:
    """Unit of a heading that names a scale of sizes rather than a size."""
    for heading in headings:
        if _SCALE.search(plain(heading)) and not any(ch.isdigit() for ch in heading):
            unit = unit_in(heading)
            if unit in ("phi", "mm", "um"):
                return unit
    return None


def size_columns(
    headings: list[str], lowest: list[str], units: list[str], taken: Iterable[int], where: Where
) -> list[SizeColumn]:
    """Find the columns of a size analysis, coarse to fine; empty if there are fewer than three.

    Raises
    ------
    SampleError
        If there are size classes but no unit, or classes that overlap or leave a gap.
    """
    skip, found = set(taken), []
    tares: dict[str, int] = {}
    named: dict[int, str] = {}
    scale = scale_unit(headings)
    for index, heading in enumerate(headings):
        if index in skip or is_blank(heading):
            continue
        unit = next((u for u in map(unit_in, (lowest[index], units[index], heading)) if u in ("phi", "mm", "um")), None)
        if (unit is None and re.fullmatch(_N, lowest[index].strip())) or (unit is None and _PAN.search(plain(heading))):
            unit = scale
        size = size_in(lowest[index], unit) or size_in(heading, unit)
        if size is None and unit is None and _looks_open(lowest[index]):
            raise where.at(heading).error(
                "a size class without its unit", "phi, mm or µm", "write the unit into the heading"
            )
        if size is not None and is_tare(heading):
            tares[str(size)] = index
        elif size is not None:
            found.append(
                SizeColumn(index, heading, *_meant(size, heading), of_sand=bool(_OF_SAND.search(plain(heading))))
            )
            named[index] = str(size)
    real = [c for c in found if c.meaning != "pan"]
    if len(real) < FEWEST:
        return []
    found = _one_of_each(found, units, where)
    found = [replace(c, tare=tares.get(named[c.index], -1)) for c in found]
    columns = sorted(found, key=lambda c: (c.coarse_phi if not math.isnan(c.coarse_phi) else math.inf, c.fine_phi))
    _check_tiles([c for c in columns if c.meaning == "class"], where)
    return columns


def _one_of_each(found: list[SizeColumn], units: list[str], where: Where) -> list[SizeColumn]:
    """One column for each size; where weights and percents stand side by side, the weights.

    Raises
    ------
    SampleError
        If a size has two columns that are not told apart by their units.
    """
    groups: dict[tuple[str, str, str], list[SizeColumn]] = {}
    for column in found:
        key = (column.meaning, f"{column.coarse_phi:.6f}", f"{column.fine_phi:.6f}")
        if column.fine_phi == math.inf and column.meaning in ("class", "pan"):
            key = ("finest", "", "")
        groups.setdefault(key, []).append(column)
    if all(len(group) == 1 for group in groups.values()):
        return found
    kept: list[SizeColumn] = []
    for group in groups.values():
        weighed = [c for c in group if is_weight(c.heading) or is_weight(units[c.index])]
        if len(group) > 1 and len(weighed) != 1:
            names = " and ".join(f'"{c.heading}"' for c in group[:2])
            raise where.error(
                f"two columns for one size, {names}", "one", "take one out, or write g into the headings of the weights"
            )
        kept += weighed if len(group) > 1 else group
    return [c for c in found if c in kept]


def _meant(size: tuple[float, float, str], heading: str) -> tuple[float, float, str]:
    words = plain(heading)
    if size[2] == "single" or (size[2] == "class" and math.isinf(size[1])):
        limit = size[0]
        if _COARSER.search(words):
            return limit, limit, "coarser"
        if _FINER.search(words) and (size[2] == "single" or "cum" in words):
            return limit, limit, "finer"
        if _CUMULATIVE.search(words) and size[2] == "single":
            return limit, limit, "cumulative"
    return size


def _check_tiles(classes: list[SizeColumn], where: Where) -> None:
    for one, other in itertools.pairwise(classes):
        gap = other.coarse_phi - one.fine_phi
        if abs(gap) > SAME_LIMIT_PHI:
            what = "leave a gap" if gap > 0 else "overlap"
            raise where.error(
                f'size classes "{one.heading}" and "{other.heading}" that {what}',
                "classes that follow each other",
                "correct the headings, or name mud, sand and gravel under columns",
            )


def _looks_open(text: str) -> bool:
    words = plain(text)
    match = _BETWEEN.fullmatch(words) or _LESS.fullmatch(words) or _MORE.fullmatch(words)
    return match is not None and not _NO_SIZE.search(words)


def _phi(number: str, unit: str | None) -> float | None:
    value = float(number.replace(",", "."))
    if unit == "phi":
        return value
    if unit in ("mm", "um"):
        return -math.log2(value / (1.0 if unit == "mm" else 1000.0)) if value > 0.0 else None
    return None
