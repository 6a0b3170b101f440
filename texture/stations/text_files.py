"""Text tables: which encoding, which delimiter, then cells."""

from __future__ import annotations

import codecs
import csv
import io
from collections.abc import Iterator
from pathlib import Path

from texture.errors import SampleError
from texture.stations.files import Cell, Sheet
from texture.stations.headings import roles_in

__all__ = ["find_delimiter", "find_encoding", "read_text"]

DELIMITERS = (",", ";", "\t", "|")
SPACES = " "  # stands for runs of white space
LOOKED_AT = 300  # lines that decide the delimiter
WIDEST = 16_384  # columns of the widest spreadsheet; a wider text table is a mistake
CELL_LIMIT = 1_000_000  # characters; the longest remark seen is far below, a broken quote is above
LINES_IN_CELL = 20  # a remark may hold a few lines; an unclosed quotation mark swallows the rest of the file
NAMES = {",": "commas", ";": "semicolons", "\t": "tabs", "|": "bars", SPACES: "spaces"}


def find_encoding(raw: bytes) -> str:
    r"""Tell the encoding of a text table: a byte-order mark, UTF-16 by its zeros, UTF-8, else Windows or ISO Latin.

    >>> find_encoding("Länge;Breite".encode("cp1252")), find_encoding("a,b".encode("utf-16-le"))
    ('cp1252', 'utf-16-le')
    """
    for mark, name in (
        (codecs.BOM_UTF8, "utf-8-sig"),
        (codecs.BOM_UTF16_LE, "utf-16"),
        (codecs.BOM_UTF16_BE, "utf-16"),
    ):
        if raw.startswith(mark):
            return name
    head = raw[:4096]
    if b"\0" in head:
        half = max(1, len(head) // 2)
        if head[1::2].count(0) > 0.4 * half and head[0::2].count(0) < 0.1 * half:
            return "utf-16-le"
        if head[0::2].count(0) > 0.4 * half and head[1::2].count(0) < 0.1 * half:
            return "utf-16-be"
        raise UnicodeError("zero bytes")
    for name in ("utf-8", "cp1252"):
        try:
            raw.decode(name)
        except UnicodeDecodeError:
            continue
        return name
    return "latin-1"  # cp1252 leaves five bytes undefined; Latin-1 none


def find_delimiter(lines: list[str]) -> str:
    """Tell the delimiter from the first lines: the one under which a line shows the most known headings.

    Counting alone is misled by decimal commas; headings are not. Without any known heading, the delimiter
    that gives the most lines the same number of cells wins.
    """
    if lines and lines[0].lower().startswith("sep=") and len(lines[0].strip()) == 5:
        return lines[0].strip()[4]

    def merit(delimiter: str) -> tuple[int, float]:
        try:
            rows = [row for row in _split(lines, delimiter) if any(c.strip() for c in row)]
        except csv.Error:  # not split by this delimiter, the text is one endless cell
            return 0, 0.0
        if not rows:
            return 0, 0.0
        known = max(len(roles_in(row)) for row in rows[:60])
        widths = [len(row) for row in rows]
        common = max(set(widths), key=lambda w: (widths.count(w), w))
        return known, widths.count(common) / len(widths) if common > 1 else 0.0

    best = max(DELIMITERS, key=merit)
    known, agree = merit(best)
    if known < 2 and agree < 0.5 and merit(SPACES) > (known, agree):
        return SPACES
    return best


def read_text(path: Path) -> Sheet:
    """Read a text table of any common delimiter and encoding.

    Raises
    ------
    SampleError
        If the file is not text, has one cell of more than a million characters or more columns than any
        spreadsheet.
    """
    raw = path.read_bytes()
    try:
        encoding = find_encoding(raw)
        text = raw.decode(encoding)
    except UnicodeError as error:
        raise SampleError(
            f"{path.name}: neither a spreadsheet nor a text table; export it as xlsx, ods or csv"
        ) from error
    del raw
    if _is_binary(text):
        raise SampleError(f"{path.name}: neither a spreadsheet nor a text table; export it as xlsx, ods or csv")
    csv.field_size_limit(CELL_LIMIT)
    rows: list[list[Cell]] = []
    try:
        delimiter = find_delimiter(_first_lines(text))
        for row in _split(io.StringIO(text, newline=""), delimiter):
            if len(row) > WIDEST:
                raise SampleError(
                    f"{path.name}, row {len(rows) + 1}: {len(row)} columns, expected at most {WIDEST}; "
                    "check the delimiter and the export"
                )
            if any("\n" in cell and cell.count("\n") > LINES_IN_CELL for cell in row):
                raise SampleError(
                    f"{path.name}, row {len(rows) + 1}: one cell runs over {LINES_IN_CELL} lines; "
                    "look for an unclosed quotation mark"
                )
            rows.append(row)  # type: ignore[arg-type]
    except csv.Error as error:
        raise SampleError(
            f"{path.name}, row {len(rows) + 1}: cannot be split into cells ({error}); look for an unclosed quotation mark"
        ) from error
    return Sheet(
        path.name, "", rows, notes=(f"{path.name}: {encoding}, cells separated by {NAMES.get(delimiter, delimiter)}",)
    )


def _is_binary(text: str) -> bool:
    """Whether the beginning holds control characters, which no table does."""
    head = text[:4096]
    return sum(ord(c) < 32 and c not in "\t\r\n\f\x1a" for c in head) > 0.005 * len(head)


def _first_lines(text: str) -> list[str]:
    stream = io.StringIO(text[: 2**20], newline="")
    return [line for _, line in zip(range(LOOKED_AT), stream, strict=False)]


def _split(lines: list[str] | io.StringIO, delimiter: str) -> Iterator[list[str]]:
    if delimiter == SPACES:
        return (line.split() for line in lines)
    return csv.reader(lines, delimiter=delimiter, skipinitialspace=True)
