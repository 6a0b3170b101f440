"""Text tables: which encoding, which delimiter, then cells."""

from __future__ import annotations

import codecs
import csv
import itertools
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import BinaryIO, TextIO

from texture.errors import SampleError
from texture.stations.files import Cell, Sheet
from texture.stations.headings import roles_in

__all__ = ["find_delimiter", "find_encoding", "read_text"]

DELIMITERS = (",", ";", "\t", "|")
SPACES = " "  # stands for runs of white space
LOOKED_AT = 300  # lines that decide the delimiter
WIDEST = 16_384  # columns of the widest spreadsheet; a wider text table is a mistake
LINE_LIMIT = 4_000_000  # characters
CP1252_UNDEFINED = b"\x81\x8d\x8f\x90\x9d"
CELL_LIMIT = 1_000_000  # characters; the longest remark seen is far below, a broken quote is above
LINES_IN_CELL = 20  # a remark may hold a few lines; an unclosed quotation mark swallows the rest of the file
NAMES = {",": "commas", ";": "semicolons", "\t": "tabs", "|": "bars", SPACES: "spaces"}


def find_encoding(stream: BinaryIO) -> str:
    r"""Tell the encoding of a text table: a byte-order mark, UTF-16 by its zeros, UTF-8, else Windows or ISO Latin.

    Parameters
    ----------
    stream : binary file
        Read to its end in pieces.

    Raises
    ------
    UnicodeError
        If zero bytes stand where no encoding puts them.

    Examples
    --------
    >>> import io
    >>> [find_encoding(io.BytesIO(raw)) for raw in ("Länge;Breite".encode("cp1252"), "a,b".encode("utf-16-le"))]
    ['cp1252', 'utf-16-le']
    """
    head = stream.read(4096)
    for mark, name in (
        (codecs.BOM_UTF8, "utf-8-sig"),
        (codecs.BOM_UTF16_LE, "utf-16"),
        (codecs.BOM_UTF16_BE, "utf-16"),
    ):
        if head.startswith(mark):
            return name
    if b"\0" in head:
        half = max(1, len(head) // 2)
        if head[1::2].count(0) > 0.4 * half and head[0::2].count(0) < 0.1 * half:
            return "utf-16-le"
        if head[0::2].count(0) > 0.4 * half and head[1::2].count(0) < 0.1 * half:
            return "utf-16-be"
        raise UnicodeError("zero bytes")
    utf8, is_utf8, is_cp1252, piece = codecs.getincrementaldecoder("utf-8")(), True, True, head
    while piece:
        if is_utf8:
            try:
                utf8.decode(piece)
            except UnicodeDecodeError:
                is_utf8 = False
        is_cp1252 = is_cp1252 and not any(byte in piece for byte in CP1252_UNDEFINED)
        piece = stream.read(2**20)
    return "utf-8" if is_utf8 else "cp1252" if is_cp1252 else "latin-1"  # Latin-1 defines every byte


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
    try:
        with path.open("rb") as stream:
            encoding = find_encoding(stream)
        csv.field_size_limit(CELL_LIMIT)
        with path.open(encoding=encoding, newline="") as text:
            lines = list(itertools.islice(_lines(text, path.name), LOOKED_AT))
            if _is_binary("".join(lines[:50])):
                raise UnicodeError("control characters")
            delimiter = find_delimiter(lines)
            text.seek(0)
            rows = _rows(_split(_lines(text, path.name), delimiter), path.name)
    except UnicodeError as error:
        raise SampleError(
            f"{path.name}: neither a spreadsheet nor a text table; export it as xlsx, ods or csv"
        ) from error
    return Sheet(
        path.name, "", rows, notes=(f"{path.name}: {encoding}, cells separated by {NAMES.get(delimiter, delimiter)}",)
    )


def _rows(reader: Iterator[list[str]], name: str) -> list[list[Cell]]:
    rows: list[list[Cell]] = []
    try:
        for row in reader:
            if len(row) > WIDEST:
                raise SampleError(
                    f"{name}, row {len(rows) + 1}: {len(row)} columns, expected at most {WIDEST}; "
                    "check the delimiter and the export"
                )
            if any("\n" in cell and cell.count("\n") > LINES_IN_CELL for cell in row):
                raise SampleError(
                    f"{name}, row {len(rows) + 1}: one cell runs over {LINES_IN_CELL} lines; "
                    "look for an unclosed quotation mark"
                )
            rows.append(row)  # type: ignore[arg-type]
    except csv.Error as error:
        raise SampleError(
            f"{name}, row {len(rows) + 1}: cannot be split into cells ({error}); look for an unclosed quotation mark"
        ) from error
    return rows


def _lines(text: TextIO, name: str) -> Iterator[str]:
    """Lines of a file; a line that never ends is refused before it fills the memory."""
    number = 0
    while line := text.readline(LINE_LIMIT):
        number += 1
        if len(line) == LINE_LIMIT:
            raise SampleError(f"{name}, line {number}: more than {LINE_LIMIT:,} characters; check the export")
        yield line


def _is_binary(head: str) -> bool:
    """Whether the beginning holds control characters, which no table does."""
    head = head[:4096]
    return sum(ord(c) < 32 and c not in "\t\r\n\f\x1a" for c in head) > 0.005 * len(head)


def _split(lines: Iterable[str], delimiter: str) -> Iterator[list[str]]:
    if delimiter == SPACES:
        return (line.split() for line in lines)
    return csv.reader(lines, delimiter=delimiter, skipinitialspace=True)
