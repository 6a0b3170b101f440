"""Whole files: what becomes of every row, and what a wrong file is told."""

import re

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.stations.samples import HEADER, ROWS, as_csv, recipe_for, write_xlsx
from texture.errors import SampleError
from texture.stations import read_samples
from texture.stations.files import read_sheets

GOOD = [HEADER, *ROWS]


def law(stations):
    c = stations.counts
    parts = ("rows_used", "rows_merged", "rows_evidence", "rows_set_aside", "rows_not_samples")
    return c["rows_read"] == sum(c[p] for p in parts)


def test_a_plain_file_read_from_all_sides(read):
    stations = read(GOOD)
    assert stations.counts == {
        "rows_read": 7, "rows_used": 6, "rows_merged": 0, "rows_evidence": 0, "rows_set_aside": 0, "rows_not_samples": 1, "stations": 6,
    }  # fmt: skip
    assert stations.table["row"].tolist() == [2, 3, 4, 5, 6, 7]
    assert stations.table["survey"].unique().tolist() == ["survey"]
    assert stations.table.crs.to_epsg() == 4326
    assert "6 with sediment from 1 survey" in repr(stations)
    assert "<table" in stations._repr_html_()


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "cp1252", "latin-1"])
@pytest.mark.parametrize("delimiter", [",", ";", "\t", "|"])
def test_encodings_and_delimiters(read, encoding, delimiter):
    rows = [[*HEADER[:3], "Fraction <63 µm", *HEADER[4:]], *[[*r[:-1], "près"] for r in ROWS]]
    stations = read(as_csv(rows, delimiter).encode(encoding))
    assert stations.counts["stations"] == 6
    assert stations.table["mud"].tolist() == pytest.approx([r[3] / 100 for r in ROWS])


def test_decimal_commas_between_semicolons(read):
    rows = [[str(c).replace(".", ",") if isinstance(c, float) else c for c in r] for r in ROWS]
    assert read(as_csv([HEADER, *rows], ";")).table["latitude"].tolist() == [r[1] for r in ROWS]


def test_titles_two_header_lines_units_notes_and_hard_ground(tmp_path):
    rows = [
        ["Survey of the bight, percent of dry weight"],
        [],
        ["Station", "Position", "", "Depth", "Grain size", "", "", "Remarks"],
        ["", "Latitude", "Longitude", "", "Mud", "Sand", "Gravel", ""],
        ["", "deg min", "deg min", "m", "%", "%", "%", ""],
        *[[r[0], f"54 0{i}.50 N", f"3 1{i}.25 E", 10.0 + i, *r[3:]] for i, r in enumerate(ROWS)],
        ["Station", "Latitude", "Longitude", "", "Mud", "Sand", "Gravel", ""],
        ["A7", "54 07.50 N", "3 17.25 E", 12.0, "", "", "", "no recovery, rock"],
        ["A8", "54 08.50 N", "3 18.25 E", 12.0, "", "", "", "jar lost"],
        ["A9", "", "", 12.0, 10, 90, 0, ""],
        ["Mean", "", "", 12.0, 25, 75, 0, ""],
        [],
        ["Note: percent by dry weight"],
    ]
    path = tmp_path / "survey.xlsx"
    write_xlsx(path, {"Notes": [["nothing here"]], "Stations": rows}, merged=())
    stations = read_samples(recipe_for({"file": path}))
    ledger = stations.ledger.set_index("row")
    assert ledger.loc[[1, 3, 4, 5, 12], "reason"].tolist() == [
        "title or note above the table", "header line", "header line", "units row", "repeated header line",
    ]  # fmt: skip
    assert ledger.loc[[13, 14, 15, 16, 18], "fate"].tolist() == [
        "evidence",
        "set_aside",
        "set_aside",
        "not_samples",
        "not_samples",
    ]
    assert stations.set_aside["reason"].tolist() == ["no share of mud, sand or gravel", "no position"]
    assert stations.hard_ground["id"].tolist() == ["A7"]
    assert stations.table["depth_m"].tolist()[:2] == [10.0, 11.0]
    assert stations.table["latitude"].iloc[0] == pytest.approx(54 + 0.5 / 60)
    assert any("not read: Notes" in note for note in stations.notes)
    assert law(stations)


def test_merged_header_cells_and_openpyxl_agrees_on_every_cell(tmp_path):
    import openpyxl

    rows = [
        ["Station", "Position", None, "Grain size", None, None],
        [None, "Latitude", "Longitude", "Mud", "Sand", "Gravel"],
        *[r[:6] for r in ROWS],
    ]
    path = tmp_path / "merged.xlsx"
    write_xlsx(path, {"Stations": rows}, merged=("A1:A2", "B1:C1", "D1:F1"))
    sheet = read_sheets(path)[0]
    other = [list(r) for r in openpyxl.load_workbook(path)["Stations"].iter_rows(values_only=True)]
    ours = [[None if c == "" else c for c in row] for row in sheet.rows]
    assert ours == other
    block = {"file": path, "columns": {"mud": "Grain size Mud", "latitude": "Position Latitude"}}
    assert read_samples(recipe_for(block)).counts["stations"] == 6


def test_repeats_are_merged_and_accounted_for(read):
    stations = read([*GOOD, ["A1b", *ROWS[0][1:3], 32.5, 60.0, 7.5, ""]])
    assert (stations.counts["rows_used"], stations.counts["rows_merged"], stations.counts["stations"]) == (6, 1, 6)
    first = stations.table.iloc[0]
    assert (first["mud"], first["repeats"]) == (pytest.approx(0.225), 2)
    assert stations.ledger["reason"].iloc[-1] == "repeat of row 2 of survey.csv"


def test_samples_from_below_the_surface_are_set_aside(read):
    rows = [[*r, top, top + 5] for r, top in zip(ROWS, [0, 0, 0, 0, 0, 30], strict=True)]
    stations = read([[*HEADER, "Sample top (cm)", "Sample bottom (cm)"], *rows])
    assert stations.set_aside["reason"].tolist() == [
        "begins 0.3 m below the surface of the bed, deeper than intake.surface_m = 0.1"
    ]


def test_slices_of_a_core_make_one_station_above_the_surface_depth(read):
    slices = [
        ["C1", 54.5, 3.5, 50, 50, 0, "", 0, 5],
        ["C1", 54.5, 3.5, 20, 80, 0, "", 5, 20],
        ["C1", 54.5, 3.5, 90, 10, 0, "", 20, 30],
    ]
    stations = read([[*HEADER, "Top (cm)", "Bottom (cm)"], *[[*r, "", ""] for r in ROWS], *slices])
    core = stations.table.set_index("id").loc["C1"]
    assert core["mud"] == pytest.approx(0.35)  # 5 cm each above 10 cm
    assert core["repeats"] == 1
    assert stations.set_aside["row"].tolist() == [10]


def test_a_sample_depth_without_unit_is_refused(read):
    with pytest.raises(
        SampleError,
        match=r'row 7, column "Sample top": found "30" without a unit, expected a heading that says cm or m',
    ):
        read([[*HEADER, "Sample top"], *[[*r, t] for r, t in zip(ROWS, [0, 0, 0, 0, 0, 30], strict=True)]])


def test_n_and_e_that_hold_degrees_and_a_geographic_system_for_x_and_y(read):
    head = ["Station", "N", "E", *HEADER[3:]]
    assert read([head, *ROWS]).table["latitude"].tolist() == [r[1] for r in ROWS]
    head = ["Station", "Y", "X", *HEADER[3:]]
    assert read([head, *ROWS], block={"crs": "EPSG:4326"}).table["longitude"].tolist() == [r[2] for r in ROWS]
    with pytest.raises(SampleError, match="these look like degrees: name them longitude and latitude"):
        read([head, *ROWS])


def test_survey_days_fill_missing_dates(read):
    rows = [[*r, d] for r, d in zip(ROWS, ["17/05/1987", "", "18/05/1987", "", "", ""], strict=True)]
    stations = read([[*HEADER, "Date"], *rows], block={"from": "1987-05-11", "to": "1987-05-22"})
    assert stations.table["date"].tolist()[:3] == ["1987-05-17", "1987-05-11/1987-05-22", "1987-05-18"]


# One fault, one line: each message names the place, what was found and what to do.
@pytest.mark.parametrize(
    ("change", "block", "message"),
    [
        (lambda r: r, {"columns": {"mud": "Muds (%)"}}, r'survey\.csv: found no column "Muds \(%\)".*did you mean "Mud \(%\)"\?'),
        (lambda r: [[x for i, x in enumerate(row) if i not in (1, 2)] for row in r], {}, r"survey\.csv, row 1: found headings .*expected columns of latitude and longitude"),
        (lambda r: [row[:3] + row[6:] for row in r], {}, r"expected a column of mud, sand or gravel"),
        (lambda r: r[:5], {}, r"survey\.csv: 4 usable stations, expected at least 5"),
        (lambda r: [[*r[0], "Mud %"], *[[*row, 3] for row in r[1:]]], {}, r'found two columns for mud, "Mud \(%\)" and "Mud %", expected one; choose with columns\.mud'),
        (lambda r: r, {"header_row": 40}, r"survey\.csv, row 40: found an empty row, expected the first header line"),
        (lambda r: r, {"sheet": "Data"}, r'survey\.csv: no sheet "Data"'),
        (lambda r: [["just"], ["some", "words"]], {}, r"survey\.csv: no table of samples found"),
    ],
)  # fmt: skip
def test_wrong_files_get_one_clear_line(read, change, block, message):
    with pytest.raises(SampleError, match=message) as caught:
        read(change([list(r) for r in GOOD]), block=block)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "the file is empty"),
        (b"\x00\x01\x02\x03" * 500, "neither a spreadsheet nor a text table"),
        (b"PK\x03\x04" + b"rubbish" * 50, "cut off or damaged"),
        (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + b"\0" * 2000, "not a readable workbook"),
        (b"a," * 20_000, "20001 columns, expected at most 16384"),
    ],
)
def test_what_is_no_table_is_refused(read, content, message):
    with pytest.raises(SampleError, match=re.escape(message)):
        read(content)


def test_a_missing_file(tmp_path):
    with pytest.raises(SampleError, match=r"none\.csv: cannot be read \(No such file or directory\)"):
        read_samples(recipe_for({"file": tmp_path / "none.csv"}))


def test_the_same_sheet_twice(read, tmp_path):
    read(GOOD)
    block = {"file": tmp_path / "survey.csv"}
    with pytest.raises(SampleError, match="given twice in the recipe"):
        read_samples(recipe_for(block, block))


cell = st.one_of(
    st.none(), st.just(""), st.floats(-5, 150).map(lambda v: round(v, 1)), st.sampled_from(["<1", "trace", "nd", "-", "5-10", ">95", "~3", "rock", "no recovery", "x y", "Mean"])
)  # fmt: skip


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.lists(cell, min_size=1, max_size=7), max_size=12))
def test_no_row_is_ever_lost(read, extra):
    """Whatever stands below five good rows: read and accounted for, or refused in one line."""
    try:
        stations = read([*GOOD, *extra], "any.csv")
    except SampleError as error:
        said = str(error)
    else:
        said = ""
    if said:  # several shares above 100 % stop the file
        assert re.search(r'any\.csv, row \d+, column ".*expected a share of at most 100 %', said)
        return
    assert law(stations)
    filled = sum(any(c not in (None, "") for c in row) for row in [*GOOD, *extra])
    assert stations.counts["rows_read"] == filled
    whole = stations.samples[["mud", "sand", "gravel"]].dropna().to_numpy()
    np.testing.assert_allclose(whole.sum(axis=1), 1.0, atol=1e-12)
    assert (whole >= 0).all()


def test_the_same_survey_in_two_spreadsheets_is_counted_once(tmp_path):
    (tmp_path / "a.csv").write_text(as_csv(GOOD))
    renamed = [[f"Lab{i}", *r[1:]] for i, r in enumerate(ROWS)]
    (tmp_path / "b.csv").write_text(as_csv([HEADER, *renamed, ["New", 54.5, 3.5, 10, 90, 0, ""]]))
    stations = read_samples(recipe_for({"file": tmp_path / "a.csv"}, {"file": tmp_path / "b.csv"}))
    assert stations.counts["rows_merged"] == 6
    assert stations.table["repeats"].tolist() == [1] * 7
    assert (
        stations.ledger.loc[stations.ledger["fate"] == "merged", "reason"].iloc[0]
        == "the same sample as row 2 of a.csv"
    )
    assert 'surveys "a" and "b" share 6 samples of the same place and fractions: counted once' in stations.notes


def test_a_few_samples_that_agree_by_chance_are_kept(tmp_path):
    (tmp_path / "a.csv").write_text(as_csv(GOOD))
    other = [[r[0], r[1] + 1, *r[2:]] for r in ROWS]
    (tmp_path / "b.csv").write_text(as_csv([HEADER, *other, *ROWS[:3]]))
    stations = read_samples(recipe_for({"file": tmp_path / "a.csv"}, {"file": tmp_path / "b.csv"}))
    assert (stations.counts["rows_merged"], stations.counts["stations"]) == (0, 15)


def test_two_files_of_one_name_are_told_apart_by_their_folders(tmp_path):
    for folder, shift in (("north", 1.0), ("south", 0.0)):
        (tmp_path / folder).mkdir()
        (tmp_path / folder / "grabs.csv").write_text(as_csv([HEADER, *[[r[0], r[1] + shift, *r[2:]] for r in ROWS]]))
    stations = read_samples(
        recipe_for(*({"file": tmp_path / f / "grabs.csv", "survey": f} for f in ("north", "south")))
    )
    assert stations.accounts["file"].tolist() == ["north/grabs.csv", "south/grabs.csv"]
