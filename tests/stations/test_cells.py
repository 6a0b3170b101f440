"""Numeric cells: decimal sign once for a column, limits, traces, ranges, blanks, rounding."""

import datetime as dt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.errors import SampleError
from texture.stations.cells import Reading, read_numbers, usual_decimals
from texture.stations.where import Where

HERE = Where("a.xlsx", "Data", "Mud")


def read(cells, **options):
    return read_numbers(cells, HERE, range(2, 2 + len(cells)), **options)


@pytest.mark.parametrize(
    ("cell", "value", "reading"),
    [
        (12.5, 12.5, Reading.PLAIN),
        ("12.5", 12.5, Reading.PLAIN),
        (" 12.5 % ", 12.5, Reading.PLAIN),
        (".5", 0.5, Reading.PLAIN),
        ("1.2E-01", 0.12, Reading.PLAIN),
        ("−3", -3.0, Reading.PLAIN),
        ("<1", 1.0, Reading.BELOW),
        ("≤ 0.5 %", 0.5, Reading.BELOW),
        (">95", 95.0, Reading.ABOVE),
        ("5-10", 7.5, Reading.RANGE),
        ("5 to 10 %", 7.5, Reading.RANGE),
        ("~3", 3.0, Reading.ABOUT),
        ("3?", 3.0, Reading.ABOUT),
        ("12.5*", 12.5, Reading.MARKED),
        ("4.2 g", 4.2, Reading.MARKED),
        ("trace", np.nan, Reading.TRACE),
        ("Tr.", np.nan, Reading.TRACE),
        ("nd", np.nan, Reading.MISSING),
        ("-", np.nan, Reading.MISSING),
        (-999, np.nan, Reading.MISSING),
        ("#DIV/0!", np.nan, Reading.MISSING),
        ("", np.nan, Reading.BLANK),
        ("  ", np.nan, Reading.BLANK),
        (None, np.nan, Reading.BLANK),
        ("about a third", np.nan, Reading.UNREADABLE),
        ("10-5", np.nan, Reading.UNREADABLE),
        (dt.date(2024, 10, 5), np.nan, Reading.UNREADABLE),
        (True, np.nan, Reading.UNREADABLE),
    ],
)
def test_what_one_cell_says(cell, value, reading):
    numbers = read([cell])
    np.testing.assert_equal(numbers.value[0], value)
    assert Reading(numbers.reading[0]) is reading


def test_decimal_comma_is_decided_for_the_column():
    numbers = read(["12,5", "7", "0,125", 3.5])
    assert numbers.decimal_comma
    assert numbers.value.tolist() == [12.5, 7.0, 0.125, 3.5]


def test_points_of_thousands_in_a_column_of_decimal_commas():
    assert read(["1.234,5", "987,25"]).value.tolist() == [1234.5, 987.25]


def test_thousands_are_read_only_where_they_are_expected():
    assert read(["512,340", "498,120"], thousands=True).value.tolist() == [512340.0, 498120.0]
    assert read(["512,340", "498,120"]).value.tolist() == [512.34, 498.12]


@pytest.mark.parametrize("cells", [["12,5", "12.5"], ["12.500", "12,500"], ["0.5", "", "1,25"]])
def test_mixed_decimal_signs_are_refused_with_both_rows(cells):
    with pytest.raises(
        SampleError, match=r'a\.xlsx, sheet "Data", row 2, column "Mud": found .*row [34].*one decimal sign'
    ):
        read(cells)


def test_rounding_follows_the_digits_of_the_column_not_of_the_cell():
    # 13 in a column of tenths was 13.0 before a spreadsheet dropped the zero
    half = read([12.5, 13, 13.2, 12.9, 11.7, 9.25]).half_width
    np.testing.assert_allclose(half, [0.05, 0.05, 0.05, 0.05, 0.05, 0.005])
    np.testing.assert_allclose(read(["7", "12", "81"]).half_width, 0.5)


def test_usual_decimals_of_nothing_is_none():
    assert usual_decimals(np.array([], dtype=np.int16)) == 0


@given(st.lists(st.decimals(min_value=0, max_value=100, places=2, allow_nan=False), min_size=1, max_size=30))
def test_typed_decimals_come_back_exactly_with_either_sign(values):
    with_points = read([str(v) for v in values]).value
    with_commas = read([str(v).replace(".", ",") for v in values]).value
    expected = np.array([float(v) for v in values])
    assert np.array_equal(with_points, expected)
    assert np.array_equal(with_commas, expected)
