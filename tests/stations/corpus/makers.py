"""How the files of the corpus are made: bytes of text tables and workbooks from rows of cells."""

import io
import re
import zipfile
from collections.abc import Callable, Sequence
from typing import Any

import openpyxl

from tests.stations.samples import as_csv

Rows = Sequence[Sequence[Any]]


def text(rows: Rows, delimiter: str = ",", encoding: str = "utf-8", newline: str = "\n") -> bytes:
    return as_csv([list(r) for r in rows], delimiter).replace("\n", newline).encode(encoding)


def xlsx(
    sheets: dict[str, Rows] | Rows,
    merged: Sequence[str] = (),
    hidden_sheets: Sequence[str] = (),
    hidden_rows: Sequence[int] = (),
    formats: dict[str, str] | None = None,
) -> bytes:
    book = openpyxl.Workbook()
    book.remove(book.active)
    named = sheets if isinstance(sheets, dict) else {"Data": sheets}
    for name, rows in named.items():
        sheet = book.create_sheet(name)
        for row in rows:
            sheet.append([None if c == "" else c for c in row])
        if name in hidden_sheets:
            sheet.sheet_state = "hidden"
    for cells in merged:
        sheet.merge_cells(cells)
    for row in hidden_rows:
        sheet.row_dimensions[row].hidden = True
    for cell, style in (formats or {}).items():
        sheet[cell].number_format = style
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


def patched(book: bytes, member: str, change: Callable[[bytes], bytes]) -> bytes:
    """The same workbook with one of its XML members changed."""
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(book)) as old, zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as new:
        for info in old.infolist():
            raw = old.read(info.filename)
            new.writestr(info.filename, change(raw) if info.filename == member else raw)
    return out.getvalue()


def stale_dimension(book: bytes) -> bytes:
    """A workbook whose sheet claims to be two cells large."""
    return patched(
        book, "xl/worksheets/sheet1.xml", lambda xml: re.sub(rb'<dimension ref="[^"]*"', b'<dimension ref="A1:B1"', xml)
    )


def ods(rows: Rows) -> bytes:
    from odf.opendocument import OpenDocumentSpreadsheet
    from odf.table import Table, TableCell, TableRow
    from odf.text import P

    book = OpenDocumentSpreadsheet()
    table = Table(name="Data")
    for row in rows:
        line = TableRow()
        for cell in row:
            if cell in (None, ""):
                line.addElement(TableCell())
            elif isinstance(cell, (int, float)):
                line.addElement(TableCell(valuetype="float", value=cell))
            else:
                filled = TableCell(valuetype="string")
                filled.addElement(P(text=str(cell)))
                line.addElement(filled)
        table.addElement(line)
    book.spreadsheet.addElement(table)
    stream = io.BytesIO()
    book.write(stream)
    return stream.getvalue()
