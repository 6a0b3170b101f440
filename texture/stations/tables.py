"""Where in a sheet the table is: title lines, header lines, units, rows of samples."""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from texture.errors import SampleError
from texture.stations.files import Cell, Sheet, is_blank
from texture.stations.headings import is_unit, plain, role_of, roles_in
from texture.stations.sizes import FEWEST, count_sizes, is_size_header
from texture.stations.where import Where

__all__ = ["Table", "find_table", "looks_like_value"]

LOOKED_AT = 200  # rows searched for a header; reports with longer front matter set `header_row`
_VALUE = re.compile(r"^[<>≤≥~≈±+\-−(]?\s*[NSEW]?\s*[+\-−]?[.,]?\d")


@dataclass(frozen=True)
class Table:
    """One table as it stands in a sheet.

    Parameters
    ----------
    where : Where
    headings : list of str
        One for each column, header lines joined with a space; empty where the column has none.
    lowest : list of str
        The lowest header line alone, by which a person may also name a column.
    units : list of str
        Cells of the units row, empty where there is none.
    columns : list of list of cells
        Cells below the header, one list for each column.
    rows : list of int
        Row number of each cell in `columns`, as the spreadsheet shows it.
    aside : list of (row, reason)
        Rows of the sheet that are no samples: titles, headers, units, repeated headers.
    """

    where: Where
    headings: list[str]
    lowest: list[str]
    units: list[str]
    columns: list[list[Cell]] = field(repr=False)
    rows: list[int] = field(repr=False)
    aside: list[tuple[int, str]] = field(repr=False)
    header_rows: tuple[int, int] = (1, 1)


def looks_like_value(cell: Cell) -> bool:
    """Whether a cell looks like a measurement, a date or a position rather than a heading.

    >>> [looks_like_value(c) for c in (3.5, "12,5", "<1", "N 54°12.3'", "Mud", "trace", None)]
    [True, True, True, True, False, False, False]
    """
    if isinstance(cell, bool) or cell is None:
        return False
    if isinstance(cell, (int, float, dt.date, dt.time)):
        return True
    return isinstance(cell, str) and bool(_VALUE.match(cell.strip()))


def find_table(sheet: Sheet, mapped: Mapping[str, str] | None = None, header_row: int | None = None) -> Table | None:
    """Find the table of a sheet; None if no row of it names at least two kinds of column.

    Parameters
    ----------
    sheet : Sheet
    mapped : mapping role → heading, optional
        Headings that the recipe names count as recognised.
    header_row : int, optional
        Row number of the first header line, from 1; found if absent.

    Raises
    ------
    SampleError
        If `header_row` lies outside the sheet or on an empty row.
    """
    rows = sheet.rows
    sample = "certificate" if sheet.own_header else "column" if sheet.across else "row"
    where = Where(sheet.file, sheet.name, sample=sample)
    named = {plain(heading) for heading in (mapped or {}).values()}
    if sheet.own_header:
        first = last = 0
    elif header_row is not None:
        if header_row > len(rows) or all(is_blank(c) for c in rows[header_row - 1]):
            raise where.error(
                "an empty row", "the first header line", "correct header_row in the recipe", row=header_row
            )
        first = header_row - 1
        last = _grow_down(sheet, first, named)
    else:
        best = _best_header(rows, named)
        if best is None:
            return None
        last = _grow_down(sheet, best, named)
        first = _grow_up(sheet, best)
    width = max((len(row) for row in rows), default=0)
    lines = [_spread(sheet, i, width, below=i < last) for i in range(first, last + 1)]
    headings = [_join(line[c] for line in lines) for c in range(width)]
    lowest = [next((line[c] for line in reversed(lines) if line[c]), "") for c in range(width)]
    start = last + 1
    units = [""] * width
    if start < len(rows) and _is_units_row(rows[start]):
        units = [c.strip() if isinstance(c, str) else "" for c in _padded(rows[start], width)]
        start += 1
    if sheet.own_header:
        columns = [list(column) for column in zip(*(_padded(row, width) for row in rows[1:]), strict=True)]
        return Table(where, headings, lowest, [""] * width, columns, list(range(1, len(rows))), [], (1, 1))
    aside = [(i + 1, "title or note above the table") for i in range(first) if _filled(rows[i])]
    aside += [(i + 1, "header line") for i in range(first, last + 1) if _filled(rows[i])]
    aside += [(i + 1, "units row") for i in range(last + 1, start)]
    kept, numbers = _sample_rows(where, rows, start, [rows[i] for i in range(first, last + 1)], aside)
    columns = [list(column) for column in zip(*(_padded(row, width) for row in kept), strict=True)] if kept else []
    return Table(
        where, headings, lowest, units, columns or [[] for _ in range(width)], numbers, aside, (first + 1, last + 1)
    )


def _sample_rows(
    where: Where, rows: list[list[Cell]], start: int, header: list[list[Cell]], aside: list[tuple[int, str]]
) -> tuple[list[list[Cell]], list[int]]:
    """Split what stands below the header into rows of samples and repeated header or units lines.

    A further block under the same headings in another order is put into the order of the first.
    """
    kept: list[list[Cell]] = []
    numbers: list[int] = []
    lines = [_words(line) for line in header]
    order: list[int] | None = None
    for i in range(start, len(rows)):
        row = rows[i]
        first = next((c for c in row if not is_blank(c)), None)
        if first is None:
            continue
        # Only a row that begins with a word can be a header or units row again; most begin with an id or a number.
        if isinstance(first, str) and not first[-1:].isdigit():
            if _is_header_again(row, lines):
                order = _order_of(where, row, lines, i + 1)
                aside.append((i + 1, "repeated header line"))
                continue
            if is_unit(first) and len(row) > 1 and _is_units_row(row):
                aside.append((i + 1, "units row"))
                continue
        kept.append(row if order is None else [row[c] if c < len(row) else None for c in order])
        numbers.append(i + 1)
    return kept, numbers


def _words(line: list[Cell]) -> dict[int, str]:
    return {c: str(cell).strip().casefold() for c, cell in enumerate(line) if not is_blank(cell)}


def _is_header_again(row: list[Cell], lines: list[dict[int, str]]) -> bool:
    texts = [c for c in row if isinstance(c, str) and c.strip() and not c.strip()[-1].isdigit()]
    filled = sum(not is_blank(c) for c in row)
    if len(texts) < max(2, 0.6 * filled):
        return False
    cells = set(_words(row).values())
    if any(len(cells & set(line.values())) >= max(2, 0.6 * len(line)) for line in lines):
        return True
    return len(roles_in(texts)) >= 4  # the header of another table


def _order_of(where: Where, row: list[Cell], lines: list[dict[int, str]], number: int) -> list[int] | None:
    """Column of the row's block for each column of the table; None if they are the same."""
    again = _words(row)
    if any(all(again.get(c) in (None, word) for c, word in line.items()) for line in lines):
        return None
    own = lines[-1]
    places = {word: c for c, word in again.items()}
    if len(lines) > 1 or len(places) < len(again) or not set(own.values()) <= set(places):
        raise where.error(
            "a second header that differs from the first",
            "one table on a sheet, or further blocks under the same headings",
            "put the second table on a sheet of its own",
            row=number,
        )
    width = max(own) + 1
    return [places[own[c]] if c in own else len(row) for c in range(width)]


def _best_header(rows: list[list[Cell]], named: set[str]) -> int | None:
    """The first row that names nearly as many kinds of column as any row does; a repeated header may name more."""
    scores: list[tuple[int, int]] = []
    for i, row in enumerate(rows[:LOOKED_AT]):
        score = len(roles_in(row) | {plain(c) for c in row if isinstance(c, str) and plain(c) in named})
        scale = is_size_header(row)
        score += 2 * (scale or count_sizes(row) >= FEWEST)
        if score >= 2 and (scale or not _mostly_values(row)):
            scores.append((i, score))
    most = max((score for _, score in scores), default=0)
    return next((i for i, score in scores if score >= 0.6 * most), None)


def _mostly_values(row: list[Cell]) -> bool:
    filled = [c for c in row if not is_blank(c)]
    values = [c for c in filled if looks_like_value(c) and not (isinstance(c, str) and _is_heading(c))]
    texts = [c for c in filled if isinstance(c, str) and role_of(c) is not None]
    return len(values) > len(filled) / 2 and len(texts) < 3


def _grow_up(sheet: Sheet, best: int) -> int:
    """Take in one line above the best one if it heads groups of columns rather than the whole sheet."""
    above = best - 1
    if above < 0:
        return best
    filled = [(c, cell) for c, cell in enumerate(sheet.rows[above]) if not is_blank(cell)]
    if not filled or any(
        not isinstance(cell, str) or (looks_like_value(cell) and not role_of(cell)) for _, cell in filled
    ):
        return best
    width = sum(not is_blank(c) for c in sheet.rows[best])
    spans = [(left, right) for top, left, bottom, right in sheet.merged if top == above and right > left]
    if any(right - left + 1 >= width for left, right in spans):
        return best  # one range across the whole table is a title
    if spans or len(filled) >= 2 or filled[0][0] > 0:
        return above
    return best


def _grow_down(sheet: Sheet, first: int, named: set[str]) -> int:
    """Take in one line below if it carries further headings: text only, naming roles, and no units row."""
    below = first + 1
    if below >= len(sheet.rows):
        return first
    row, head = sheet.rows[below], sheet.rows[first]
    filled = [(c, cell) for c, cell in enumerate(row) if not is_blank(cell)]
    if not filled or any(not isinstance(cell, str) for _, cell in filled) or _is_units_row(row):
        return first
    texts = [(c, str(cell)) for c, cell in filled]
    if any(looks_like_value(cell) and not _is_heading(cell) and plain(cell) not in named for _, cell in texts):
        return first
    # A data row of words ("muddy sand", "trace") also names roles: a heading stands under a blank or a merged cell,
    # or repeats none of the roles above it.
    gaps = sum(c >= len(head) or is_blank(head[c]) for c, _ in texts)
    new = bool(roles_in(cell for _, cell in texts) - roles_in(head)) or count_sizes(row) >= FEWEST
    spans = any(top == first and right > left for top, left, _, right in sheet.merged)
    known = sum(_is_heading(cell) or is_unit(cell) or plain(cell) in named for _, cell in texts)
    return below if new and (gaps or spans) and known >= len(texts) / 2 else first


def _is_heading(cell: str) -> bool:
    """Whether a text that begins like a value ("63-125 µm", "-4 to -3") is a heading all the same."""
    return role_of(cell) is not None or count_sizes([cell]) > 0


def _is_units_row(row: list[Cell]) -> bool:
    filled = [c for c in row if not is_blank(c)]
    units = sum(is_unit(c) for c in filled)
    return units >= 1 and units >= 0.6 * len(filled) and all(isinstance(c, str) for c in filled)


def _spread(sheet: Sheet, i: int, width: int, below: bool) -> list[str]:
    """Texts of a header line; a heading of a group of columns is repeated over the group."""
    row = [_text(c) for c in _padded(sheet.rows[i], width)]
    if not below:
        return row
    spans = [(left, right) for top, left, bottom, right in sheet.merged if top == i and right > left]
    if spans:
        for left, right in spans:
            for c in range(left, min(right + 1, width)):
                row[c] = row[left]
        return row
    under = [_text(c) for c in _padded(sheet.rows[i + 1], width)]
    for c in range(1, width):
        if not row[c] and under[c] and row[c - 1] and under[c - 1]:
            row[c] = row[c - 1]
    return row


def _join(parts: Iterable[str]) -> str:
    words: list[str] = []
    for part in parts:
        if part and part not in words:
            words.append(part)
    return " ".join(words)


def _text(cell: Cell) -> str:
    if is_blank(cell):
        return ""
    if isinstance(cell, float) and cell.is_integer():
        return str(int(cell))
    return " ".join(str(cell).split())


def _filled(row: list[Cell]) -> bool:
    return any(not is_blank(c) for c in row)


def _padded(row: list[Cell], width: int) -> list[Cell]:
    return row + [None] * (width - len(row)) if len(row) < width else row


def no_table(sheets: list[Sheet]) -> SampleError:
    """Error for a file in which no table was found."""
    names = ", ".join(f'"{s.name}"' for s in sheets if s.name)
    return SampleError(
        f"{sheets[0].file}: no table of samples found{' in sheets ' + names if names else ''}; expected a header line that names "
        "positions and mud, sand or gravel; set header_row and columns in the recipe"
    )
