"""Files that would hang, bloat or abort a careless reader get one clear line, soon and in little memory."""

import time
import zipfile
from pathlib import Path

import pytest

from tests.stations.corpus.makers import ods, patched, xlsx
from tests.stations.samples import HEADER, ROWS
from texture.errors import SampleError
from texture.stations import extent, workbooks
from texture.stations.files import read_sheets

LOCKED = Path(__file__).with_name("corpus") / "locked.xlsx"  # made by another program, with a password
HEAD = b'<worksheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"><sheetData>'
TAIL = b"</sheetData></worksheet>"
FAR = b"<row r=%s><c r=%s><v>1</v></c></row><row r=%s><c r=%s><v>1</v></c></row>"


def book(sheet_xml):
    return patched(xlsx([["a"]]), "xl/worksheets/sheet1.xml", lambda _: sheet_xml)


def refused(path, content, message):
    path.write_bytes(content)
    start = time.perf_counter()
    with pytest.raises(SampleError, match=message) as caught:
        read_sheets(path)
    assert time.perf_counter() - start < 10
    assert "\n" not in str(caught.value)
    assert str(caught.value).startswith(path.name)


def test_two_cells_at_the_far_corners(tmp_path):
    # as it stands this makes the reading library ask for 512 GB and abort the interpreter
    far = FAR % (b'"1"', b'"A1"', b'"1048576"', b'"XFD1048576"')
    refused(
        tmp_path / "far.xlsx",
        book(HEAD + far + TAIL),
        r"cells as far as XFD1048576 make a sheet of 1048576 rows × 16384 columns",
    )


def test_the_same_written_so_that_the_scan_does_not_see_it(tmp_path):
    # single quotes hide the references from the scan: the child process dies, the program does not
    far = (FAR % (b'"1"', b'"A1"', b'"1048576"', b'"XFD1048576"')).replace(b'"', b"'")
    refused(tmp_path / "far.xlsx", book(HEAD + far + TAIL), "claim more cells than can be read")


def test_a_sheet_that_unpacks_to_gigabytes(tmp_path, monkeypatch):
    monkeypatch.setattr(extent, "UNPACKED_MOST", 2**22)
    refused(tmp_path / "bomb.xlsx", book(HEAD + b" " * 2**23 + TAIL), "unpacks to more than")


def test_one_endless_cell(tmp_path, monkeypatch):
    monkeypatch.setattr(extent, "TEXT_MOST", 2**21)
    cell = b'<row r="1"><c r="A1" t="inlineStr"><is><t>' + b"x" * 2**23 + b"</t></is></c></row>"
    refused(tmp_path / "cell.xlsx", book(HEAD + cell + TAIL), "one cell holds more than")
    refused(tmp_path / "cell.csv", b'a,b\n"' + b"x" * 2_000_000 + b'",1\n', "cannot be split into cells")


def test_more_cells_than_any_survey(tmp_path, monkeypatch):
    monkeypatch.setattr(extent, "AREA_MOST", 1000)
    refused(
        tmp_path / "many.xlsx",
        book(HEAD + (b"<row>" + b"<c><v>1</v></c>" * 50 + b"</row>") * 40 + TAIL),
        "more than 1,000 cells",
    )


def test_entities(tmp_path):
    entities = b'<!DOCTYPE x [<!ENTITY a "aaaaaaaa"><!ENTITY b "&a;&a;&a;">]>'
    cell = b'<row r="1"><c r="A1" t="inlineStr"><is><t>&b;</t></is></c></row>'
    refused(tmp_path / "entities.xlsx", book(entities + HEAD + cell + TAIL), "not a readable workbook")


def test_half_a_workbook(tmp_path):
    whole = xlsx([HEADER, *ROWS])
    refused(tmp_path / "half.xlsx", whole[: len(whole) // 2], "cut off or damaged")


def test_a_damaged_member(tmp_path):
    path = tmp_path / "bad.xlsx"
    path.write_bytes(xlsx([HEADER, *ROWS]))
    with zipfile.ZipFile(path) as archive:
        info = archive.getinfo("xl/worksheets/sheet1.xml")
    raw = bytearray(path.read_bytes())
    middle = info.header_offset + 30 + len(info.filename) + info.compress_size // 2
    raw[middle : middle + 20] = bytes(20)
    refused(path, bytes(raw), "damaged|not a readable workbook")


def test_workbooks_locked_by_a_password(tmp_path):
    words = "locked by a password; save an unlocked copy"
    refused(tmp_path / "locked.xlsx", LOCKED.read_bytes(), words)

    def locked(manifest):
        entry = (
            b'<manifest:file-entry manifest:full-path="content.xml" manifest:media-type="text/xml" manifest:size="10">'
        )
        secret = (
            b'<manifest:encryption-data manifest:checksum-type="SHA1" manifest:checksum="x"/></manifest:file-entry>'
        )
        return manifest.replace(b"</manifest:manifest>", entry + secret + b"</manifest:manifest>")

    refused(tmp_path / "locked.ods", patched(ods([HEADER, *ROWS]), "META-INF/manifest.xml", locked), words)


def test_an_old_workbook_of_nothing_but_its_mark(tmp_path):
    # an encrypted package is an OLE file with a stream of that name; a whole one is not needed to be refused in one line
    refused(tmp_path / "locked.xlsx", b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + b"\0" * 4000, "not a readable workbook")


def test_a_reader_that_takes_too_long(tmp_path, monkeypatch):
    monkeypatch.setattr(workbooks, "SECONDS", 0.0)
    refused(tmp_path / "slow.xlsx", xlsx([HEADER, *ROWS]), "not read within 0 s; save the sheet as csv")


def test_an_unclosed_quotation_mark(tmp_path):
    lines = [",".join(map(str, r)) for r in ROWS] * 10
    refused(
        tmp_path / "quote.csv",
        ('a,b\n1,"it\n' + "\n".join(lines)).encode(),
        "one cell runs over 20 lines; look for an unclosed quotation mark",
    )


def test_forty_thousand_merged_ranges_do_not_hang(tmp_path):
    rows = b"".join(
        b'<row r="%d"><c r="A%d"><v>1</v></c><c r="B%d"><v>2</v></c></row>' % (i, i, i) for i in range(1, 40_001)
    )
    merged = b"".join(b'<mergeCell ref="A%d:B%d"/>' % (i, i) for i in range(1, 40_001))
    path = tmp_path / "merged.xlsx"
    path.write_bytes(
        book(HEAD + rows + b'</sheetData><mergeCells count="40000">' + merged + b"</mergeCells></worksheet>")
    )
    start = time.perf_counter()
    assert len(read_sheets(path)[0].rows) == 40_000
    assert time.perf_counter() - start < 10
