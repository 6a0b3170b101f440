"""How far the cells of a zipped workbook really reach, found before a library is asked to read it."""

from __future__ import annotations

import re
import zipfile
import zlib
from dataclasses import dataclass, field
from pathlib import Path

from texture.errors import SampleError

__all__ = ["Extent", "scan_extent"]

CHUNK = 2**20
UNPACKED_MOST = 2 * 2**30  # bytes of all members; 200,000 rows of 12 columns unpack to about 0.1 GiB
AREA_MOST = 25_000_000  # cells of the rectangle that the library would allocate
TEXT_MOST = 64 * 2**20  # bytes between two tags: a single cell that large is no measurement
CELL = re.compile(rb'<(?:\w+:)?c\s[^>]*?\br="([A-Z]{1,3})([0-9]{1,7})"')
ROW = re.compile(rb"<(?:\w+:)?row\b[^>]*>")
SHEET_NAME = re.compile(rb'<(?:\w+:)?sheet\b[^>]*?\bname="([^"]*)"')


@dataclass(frozen=True)
class Extent:
    """Number of cells of the largest rectangle of each sheet together, and hidden rows by sheet name."""

    cells: int = 0
    hidden_rows: dict[str, int] = field(default_factory=dict)


def scan_extent(path: Path) -> Extent:
    """Scan a zipped workbook without unpacking it to memory; other workbooks have no such extent.

    Raises
    ------
    SampleError
        If the archive is damaged, unpacks to more than 2 GiB, or two of its cells are so far apart that
        the rectangle between them has more than twenty-five million cells.
    """
    if not zipfile.is_zipfile(path):
        with path.open("rb") as stream:
            if stream.read(4) == b"PK\x03\x04":
                raise SampleError(f"{path.name}: the workbook is cut off or damaged; fetch or save it again")
        return Extent()
    try:
        with zipfile.ZipFile(path) as archive:
            return _scan(path, archive)
    except (zipfile.BadZipFile, zlib.error, EOFError, NotImplementedError, RuntimeError) as error:
        raise SampleError(
            f"{path.name}: the workbook is damaged or encrypted ({error}); save an unlocked copy again"
        ) from error


def _scan(path: Path, archive: zipfile.ZipFile) -> Extent:
    members = archive.infolist()
    if sum(m.file_size for m in members) > UNPACKED_MOST:
        raise SampleError(f"{path.name}: unpacks to more than 2 GiB; save only the sheet with the samples")
    sheets = [m for m in members if re.search(r"worksheets/[^/]+\.xml$", m.filename)]
    texts = [m for m in members if m.filename.endswith(("sharedStrings.xml", "content.xml"))]
    total, hidden, names = 0, {}, _sheet_names(archive)
    for member in texts:
        _scan_text(path, archive, member)
    for member in sheets:
        area, hidden_rows = _scan_sheet(path, archive, member)
        total += area
        number = re.search(r"(\d+)\.xml$", member.filename)
        if hidden_rows and number and int(number[1]) <= len(names):
            hidden[names[int(number[1]) - 1]] = hidden_rows
    if not sheets:
        total = sum(m.file_size for m in texts) // 40  # an open-document cell takes more than 40 bytes
    return Extent(total, hidden)


def _sheet_names(archive: zipfile.ZipFile) -> list[str]:
    import html

    if "xl/workbook.xml" not in archive.namelist():
        return []
    with archive.open("xl/workbook.xml") as stream:
        return [html.unescape(name.decode("utf-8", "replace")) for name in SHEET_NAME.findall(stream.read(CHUNK))]


def _scan_sheet(path: Path, archive: zipfile.ZipFile, member: zipfile.ZipInfo) -> tuple[int, int]:
    """Return the area of the rectangle around all cells and the number of hidden rows."""
    bottom, right, far_column = 0, 0, b"A"
    cells, hidden, read, tail = 0, 0, 0, b""
    with archive.open(member) as stream:
        while piece := stream.read(CHUNK):
            read += len(piece)
            _check_length(path, member, read, archive)
            block = tail + piece
            cut = block.rfind(b"<")
            if cut > 0:
                block, tail = block[:cut], block[cut:]
            else:
                block, tail = b"", block
            if len(tail) > TEXT_MOST:
                raise _too_long(path)
            cells += block.count(b"<c ") + block.count(b"<c>")
            if cells > AREA_MOST:
                raise SampleError(
                    f"{path.name}, {Path(member.filename).stem}: more than {AREA_MOST:,} cells; save the table as csv"
                )
            found = CELL.findall(block)
            if found:
                lowest = max({digits for _, digits in found}, key=int)
                widest = max({letters for letters, _ in found}, key=_column)
                if _column(widest) > right:
                    right, far_column = _column(widest), widest
                bottom = max(bottom, int(lowest))
            if b'hidden="' in block:
                hidden += sum(b'hidden="1"' in tag or b'hidden="true"' in tag for tag in ROW.findall(block))
    area = bottom * right  # the library is asked for everything from A1
    if area > AREA_MOST:
        raise SampleError(
            f"{path.name}, {Path(member.filename).stem}: cells as far as {far_column.decode()}{bottom} make a sheet of {bottom} rows × {right} columns; "
            "delete what stands far from the table, or save the table as csv"
        )
    return max(area, cells), hidden


def _scan_text(path: Path, archive: zipfile.ZipFile, member: zipfile.ZipInfo) -> None:
    run = read = 0
    with archive.open(member) as stream:
        while piece := stream.read(CHUNK):
            read += len(piece)
            _check_length(path, member, read, archive)
            first, last = piece.find(b"<"), piece.rfind(b"<")
            run = run + len(piece) if first < 0 else len(piece) - last
            if run > TEXT_MOST:
                raise _too_long(path)
            if read == len(piece) and b"<!DOCTYPE" in piece:
                raise SampleError(
                    f"{path.name}: holds XML entity definitions, which no spreadsheet program writes; save it again as xlsx"
                )


def _check_length(path: Path, member: zipfile.ZipInfo, read: int, archive: zipfile.ZipFile) -> None:
    if read > UNPACKED_MOST:  # the size in the archive's list can lie
        raise SampleError(
            f"{path.name}: {member.filename} unpacks to more than 2 GiB; save only the sheet with the samples"
        )


def _too_long(path: Path) -> SampleError:
    return SampleError(f"{path.name}: one cell holds more than 64 MiB of text; remove it and save the workbook again")


def _column(letters: bytes) -> int:
    number = 0
    for letter in letters:
        number = number * 26 + letter - 64
    return number
