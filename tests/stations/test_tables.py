"""Where the table of a sheet is."""

import pytest

from tests.stations.samples import HEADER, ROWS
from texture.errors import SampleError
from texture.stations.files import Sheet
from texture.stations.tables import find_table, looks_like_value


def sheet(rows, merged=()):
    return Sheet("a.xlsx", "Data", [list(r) for r in rows], merged)


def test_a_plain_table():
    table = find_table(sheet([HEADER, *ROWS]))
    assert table.headings == HEADER
    assert table.rows == [2, 3, 4, 5, 6, 7]
    assert table.columns[3] == [r[3] for r in ROWS]


def test_a_title_across_the_whole_table_is_no_group_of_columns():
    rows = [["All stations of the bight", *[""] * 6], HEADER, *ROWS]
    table = find_table(sheet(rows, merged=((0, 0, 0, 6),)))
    assert table.headings == HEADER
    assert table.aside == [(1, "title or note above the table"), (2, "header line")]


def test_two_header_lines_are_joined_with_a_space():
    rows = [
        ["Station", "Position", None, "Grain size", None, None],
        [None, "Latitude", "Longitude", "Mud", "Sand", "Gravel"],
        *ROWS,
    ]
    joined = [
        "Station",
        "Position Latitude",
        "Position Longitude",
        "Grain size Mud",
        "Grain size Sand",
        "Grain size Gravel",
        "",
    ]
    assert find_table(sheet(rows, merged=((0, 1, 0, 2), (0, 3, 0, 5)))).headings == joined
    assert find_table(sheet(rows)).headings == joined  # formats without merged ranges: the gap says the same


def test_a_first_row_of_words_is_data_not_header():
    rows = [
        ["No.", "Latitude", "Longitude", "Bottom", "Colour"],
        ["A", "54 12 N", "3 12 E", "mud", "grey"],
        ["B", "54 13 N", "3 13 E", "sand", "brown"],
    ]
    assert find_table(sheet(rows)).rows == [2, 3]


def test_no_table():
    assert find_table(sheet([["Report"], ["of", "the", "laboratory"], [1, 2, 3]])) is None
    assert find_table(sheet([])) is None


def test_a_second_table_is_refused_rather_than_misread():
    other = ["Sample", "Latitude", "Longitude", "Depth", "Gravel", "Mud"]
    with pytest.raises(SampleError, match='sheet "Data", row 9: found a second header that differs from the first'):
        find_table(sheet([HEADER, *ROWS, [], other, ["B1", 54.2, 3.2, 10, 5, 20]]))


def test_what_looks_like_a_value():
    assert [looks_like_value(c) for c in ("-3", "N 54 12", "(12.5)", "±2", "Mud", "A1", "", True)] == [
        True,
        True,
        True,
        True,
        False,
        False,
        False,
        False,
    ]
