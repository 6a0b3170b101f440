"""Any file of samples → its sheets of raw cells, exactly as they stand in the file."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field, replace
from pathlib import Path

from texture.errors import SampleError

__all__ = ["Cell", "Sheet", "is_blank", "read_sheets"]

Cell = object
POINT_LAYERS = (".gpkg", ".geojson", ".json", ".shp")
PARQUET = b"PAR1"
ZIP, OLE = b"PK\x03\x04", b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"


@dataclass(frozen=True)
class Sheet:
    """Raw cells of one sheet.

    Parameters
    ----------
    file, name : str
        File name without folder; sheet name, empty for a text table.
    rows : list of list
        Cells as str, int, float, bool, date, datetime, time or None; `rows[0]` is the spreadsheet's
        row 1. Rows may differ in length.
    merged : tuple of (first_row, first_column, last_row, last_column)
        Merged ranges, counted from 0, both ends included.
    hidden_rows, hidden : int, bool
        Number of hidden rows; whether the whole sheet is hidden.
    across : bool
        Whether rows and columns were exchanged.
    own_header : bool
        Whether each row is a certificate and the first row, the headings, was made up from their labels.
    notes : tuple of str
        What had to be found out to read it (encoding, delimiter).
    """

    file: str
    name: str
    rows: list[list[Cell]] = field(repr=False)
    merged: tuple[tuple[int, int, int, int], ...] = field(default=(), repr=False)
    hidden_rows: int = 0
    hidden: bool = False
    notes: tuple[str, ...] = ()
    across: bool = False
    own_header: bool = False

    @property
    def filled(self) -> int:
        """Rows that say anything; a made-up line of headings is none."""
        return sum(any(not is_blank(c) for c in row) for row in self.rows) - self.own_header

    def turned(self) -> Sheet:
        """The sheet with rows and columns exchanged, for samples that stand side by side."""
        rows = [list(column) for column in itertools.zip_longest(*self.rows)]
        merged = tuple((left, top, right, bottom) for top, left, bottom, right in self.merged)
        return replace(self, rows=rows, merged=merged, across=True)


def is_blank(cell: Cell) -> bool:
    """Whether a cell shows nothing."""
    return cell is None or (isinstance(cell, str) and not cell.strip())


def read_sheets(path: str | Path) -> list[Sheet]:
    """Read every sheet of a spreadsheet, text table, parquet table or layer of points.

    Spreadsheets, parquet and text tables are told apart by their first bytes, not by their names: a `.xls` that is really a
    text table is common.

    Raises
    ------
    SampleError
        For a missing, empty, damaged or password-protected file, or one that is no table at all.
    """
    path = Path(path)
    try:
        with path.open("rb") as stream:
            head = stream.read(4096)
    except OSError as error:
        raise SampleError(f"{path}: cannot be read ({error.strerror}); check the path and its permissions") from error
    if not head.strip():
        raise SampleError(f"{path.name}: the file is empty, expected a table of samples; check the export")
    if path.suffix.casefold() in POINT_LAYERS:
        from texture.stations.points import read_points

        return read_points(path)
    if head.startswith(PARQUET):
        from texture.stations.parquet_files import read_parquet

        return read_parquet(path)
    if head.startswith((ZIP, OLE)):
        from texture.stations.workbooks import read_workbook

        return read_workbook(path)
    from texture.stations.text_files import read_text

    return [read_text(path)]
