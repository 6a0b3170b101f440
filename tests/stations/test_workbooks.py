"""Workbooks: the old binary kind, and two engines side by side on every xlsx of the corpus."""

import datetime as dt
import io
from pathlib import Path

import openpyxl
import pytest

from tests.stations.corpus.cases import CASES
from tests.stations.samples import ROWS, recipe_for
from texture.stations import read_samples
from texture.stations.files import is_blank, read_sheets

OLD = Path(__file__).with_name("corpus") / "grabs.xls"  # the rows of `samples` with dates, written by xlwt 1.3
BOOKS = [case for case in CASES if case.content[:2] == b"PK" and case.file.endswith(".xlsx")]


def test_an_old_binary_workbook_is_read():
    stations = read_samples(recipe_for({"file": OLD}))
    assert stations.table["id"].tolist() == [r[0] for r in ROWS]
    assert stations.table["mud"].tolist() == pytest.approx([r[3] / 100 for r in ROWS])
    assert stations.table["date"].tolist() == [f"1996-05-0{i}" for i in range(1, 7)]
    assert stations.counts["rows_not_samples"] == 2  # title and headings


def as_both(cell):
    """What both engines mean by a cell: no difference of int and float, of a date and its midnight, of nothing and an empty text."""
    if is_blank(cell) or (isinstance(cell, str) and cell.startswith("#") and cell.endswith(("!", "?", "A"))):
        return None  # one engine shows a formula's error, the other nothing; neither is a value
    if isinstance(cell, dt.datetime) and cell.time() == dt.time():
        return cell.date()
    if isinstance(cell, (int, float)) and not isinstance(cell, bool):
        return pytest.approx(float(cell), rel=1e-12)
    return cell


@pytest.mark.parametrize("case", BOOKS, ids=lambda case: case.name)
def test_two_engines_agree_on_the_cells_they_share(case, tmp_path):
    path = tmp_path / case.file
    path.write_bytes(case.content)
    other = openpyxl.load_workbook(io.BytesIO(case.content), data_only=True)
    compared = 0
    for sheet in read_sheets(path):
        for i, row in enumerate(other[sheet.name].iter_rows(values_only=True)):
            for j, cell in enumerate(row):
                ours = sheet.rows[i][j] if i < len(sheet.rows) and j < len(sheet.rows[i]) else None
                assert as_both(ours) == as_both(cell), f"{sheet.name} row {i + 1} column {j + 1}"
                compared += not is_blank(cell)
    assert compared > 20


def test_there_are_workbooks_to_compare():
    assert len(BOOKS) >= 20
