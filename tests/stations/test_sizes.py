"""Columns of grain-size classes: headings, tiling, sieves, cumulative curves, cuts."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.stations.samples import ROWS
from texture.errors import SampleError
from texture.stations.sizes import count_sizes, size_in

PLACES = [r[:3] for r in ROWS]
HEAD = ["Sample", "Latitude", "Longitude"]


@pytest.mark.parametrize(
    ("text", "unit", "expected"),
    [
        ("-4 to -3", "phi", (-4, -3, "class")),
        ("-1-0", "phi", (-1, 0, "class")),
        ("1 phi - 2 phi", None, (1, 2, "class")),
        ("250–500 µm", None, (1, 2, "class")),
        ("0,25-0,5 mm", None, (1, 2, "class")),
        ("< -4", "phi", (-np.inf, -4, "class")),
        ("> 9 phi", None, (9, np.inf, "class")),
        ("< 0.0625 mm (%)", None, (4, np.inf, "class")),
        (">2 mm", None, (-np.inf, -1, "class")),
        ("2 mm", None, (-1, -1, "single")),
        ("pan", "mm", (np.nan, np.inf, "pan")),
        ("Depth interval 0-2 cm", None, None),
        ("D50 (µm)", None, None),
        ("63-125", None, None),
    ],
)
def test_size_headings(text, unit, expected):
    found = size_in(text, unit)
    if expected is None:
        assert found is None
    else:
        np.testing.assert_allclose(found[:2], expected[:2])
        assert found[2] == expected[2]


def test_a_row_of_data_is_no_row_of_size_headings():
    assert count_sizes(["S1", "12.5", "3.2", 4.0, "<1", "5-10"]) <= 2
    assert count_sizes(["Sample", "> 2 mm", "1-2 mm", "0.5-1 mm"]) == 3


def table(read, heads, rows, block=None, **options):
    content = [[*HEAD, *heads], *[[*p, *r] for p, r in zip(PLACES, rows, strict=True)]]
    return read(content, "sizes.xlsx", block, **options)


def fractions(stations):
    return stations.table[["mud", "sand", "gravel"]].to_numpy()


GRAMS = [[2.0, 8.0, 30.0, 40.0, 20.0]] * 6  # gravel 2, sand 78, mud 20 of 100


@pytest.mark.parametrize(
    "heads",
    [
        ["<-1 phi g", "-1 to 0 phi g", "0 to 2 phi g", "2 to 4 phi g", ">4 phi g"],
        [">2 mm (g)", "1-2 mm (g)", "0.25-1 mm (g)", "0.0625-0.25 mm (g)", "<0.0625 mm (g)"],
        [">2000 µm", "1000-2000 µm", "250-1000 µm", "63-250 µm", "<63 µm"],
        ["Retained 2 mm", "Retained 1 mm", "Retained 0.25 mm", "Retained 0.063 mm", "Pan"],
    ],
)
def test_one_sample_under_four_kinds_of_heading(read, heads):
    stations = table(read, heads, GRAMS)
    np.testing.assert_allclose(fractions(stations), [[0.2, 0.78, 0.02]] * 6, atol=1e-12)


def test_classes_in_any_order_of_columns(read):
    heads = ["2 to 4 phi", "<-1 phi", ">4 phi", "-1 to 2 phi"]
    np.testing.assert_allclose(
        fractions(table(read, heads, [[40.0, 2.0, 20.0, 38.0]] * 6)), [[0.2, 0.78, 0.02]] * 6, atol=1e-12
    )


def test_passing_and_cumulative_retained(read):
    passing = table(
        read, ["Passing 4 mm", "Passing 2 mm", "Passing 0.5 mm", "Passing 0.063 mm"], [[100.0, 98.0, 60.0, 20.0]] * 6
    )
    np.testing.assert_allclose(fractions(passing), [[0.2, 0.78, 0.02]] * 6, atol=1e-12)
    rising = table(read, ["4 mm", "2 mm", "0.5 mm", "0.063 mm", "0.001 mm"], [[0.0, 2.0, 40.0, 80.0, 100.0]] * 6)
    np.testing.assert_allclose(fractions(rising), [[0.2, 0.78, 0.02]] * 6, atol=1e-12)
    assert any("retained, cumulative" in note for note in rising.notes)


def test_a_cut_between_class_limits_is_taken_from_the_curve_and_said(read):
    heads = ["<-1 phi", "-1 to 2 phi", "2 to 5 phi", ">5 phi"]
    stations = table(read, heads, [[2.0, 40.0, 30.0, 28.0]] * 6)
    mud = fractions(stations)[0, 0]
    assert 0.28 < mud < 0.58  # between what lies beyond 5 phi and beyond 2 phi
    assert any("between class limits" in note for note in stations.notes)
    exact = table(read, heads, [[2.0, 40.0, 30.0, 28.0]] * 6, intake={"mud_below_mm": 1 / 32})
    assert fractions(exact)[0, 0] == pytest.approx(0.28)


def test_percents_and_totals_are_held_against_each_other(read):
    heads = [">2 mm %", "0.063-2 mm %", "<0.063 mm %", "0.01-0.063 mm %"]
    with pytest.raises(SampleError, match=r'size classes ".*" and ".*" that overlap'):
        table(read, heads, [[2.0, 78.0, 20.0, 5.0]] * 6)
    rows = [[2.0, 40.0, 38.0, 20.0]] * 5 + [[2.0, 40.0, 38.0, 50.0]]
    stations = table(read, [">2 mm %", "0.5-2 mm %", "0.063-0.5 mm %", "<0.063 mm %"], rows)
    assert stations.set_aside["reason"].tolist() == ["size classes sum to 130, expected 100 ± 2"]
    rows = [[2.0, 40.0, 38.0, 20.5, 100.5]] * 5 + [[2.0, 40.0, 38.0, 50.0, 100.0]]
    stations = table(read, [">2 mm g", "0.5-2 mm g", "0.063-0.5 mm g", "<0.063 mm g", "Total (g)"], rows)
    assert stations.set_aside["reason"].tolist() == ["size classes sum to 130, the sheet's total says 100"]


def test_a_blank_class_is_not_taken_for_zero(read):
    heads, rows = (
        [">2 mm g", "0.5-2 mm g", "0.063-0.5 mm g", "<0.063 mm g"],
        [[2.0, 40.0, 38.0, 20.0]] * 5 + [["", 40.0, 38.0, 20.0]],
    )
    stations = table(read, heads, rows)
    assert 'size class ">2 mm g" is blank; say blank_means = "zero"' in stations.set_aside["reason"][0]
    assert table(read, heads, rows, {"blank_means": "zero"}).counts["stations"] == 6


def test_a_laboratory_that_saw_only_what_passed_2_mm(read):
    heads, rows = ["0.5-2 mm", "0.063-0.5 mm", "<0.063 mm"], [[40.0, 40.0, 20.0]] * 6
    below = table(read, heads, rows, {"basis": "below_2mm"})
    np.testing.assert_allclose(fractions(below), [[0.2, 0.8, np.nan]] * 6, atol=1e-12)
    whole = table(read, heads, rows)
    np.testing.assert_allclose(fractions(whole)[:, 2], 0.0)
    assert any("gravel is taken as none" in note for note in whole.notes)


@pytest.mark.parametrize(
    ("heads", "message"),
    [
        (["< 63", "63 to 125", "125 to 2000", "> 2000"], "a size class without its unit"),
        ([">2 mm", "0.5-2 mm", "0.1-0.25 mm", "<0.1 mm"], "that leave a gap"),
        ([">2 mm", "0.5-2 mm", "0.25-0.5 mm", "<0.25 mm"], r"cannot be cut at 0\.063 and 2 mm"),
    ],
)
def test_size_columns_that_make_no_sense(read, heads, message):
    with pytest.raises(SampleError, match=message):
        table(read, heads, [[10.0, 20.0, 30.0, 40.0]] * 6)


@settings(max_examples=25, deadline=None)
@given(st.lists(st.integers(0, 400), min_size=6, max_size=6).filter(lambda w: sum(w) > 0))
def test_weights_of_any_size_are_shared_out_exactly(weights):
    from texture.recipe import Intake, Samples
    from texture.stations.audit import AuditLog
    from texture.stations.size_shares import shares_from_sizes
    from texture.stations.sizes import size_columns
    from texture.stations.tables import Table
    from texture.stations.where import Where

    heads = ["<-2 phi", "-2 to -1 phi", "-1 to 1 phi", "1 to 4 phi", "4 to 8 phi", ">8 phi (g)"]
    sheet = Table(Where("a"), heads, heads, [""] * 6, [[w / 8] for w in weights], [2], [])
    columns = size_columns(heads, heads, [""] * 6, [], sheet.where)
    shares = shares_from_sizes(sheet, columns, Samples(file="a"), Intake(), AuditLog())
    total = sum(weights)
    expected = [sum(weights[4:]) / total, sum(weights[2:4]) / total, sum(weights[:2]) / total]
    np.testing.assert_allclose([shares.mud[0], shares.sand[0], shares.gravel[0]], expected, atol=1e-12)


def test_percents_beside_the_weights_are_left_out(read):
    heads = [h for size in ("2 mm", "0.063 mm", "0.25 mm", "pan") for h in (f"{size} (g)", f"{size} (%)")]
    grams = [[4.0, 2.0, 20.0, 10.0, 136.0, 68.0, 40.0, 20.0]] * 6
    np.testing.assert_allclose(fractions(table(read, heads, grams)), [[0.2, 0.78, 0.02]] * 6)


@pytest.mark.parametrize(
    "heads", [["2 mm", "0.25 mm", "0.25 mm x", "pan"], ["2 mm", "1 mm", "0.063 mm", "pan", "<0.063 mm"]]
)
def test_two_columns_for_one_size_are_refused(read, heads):
    with pytest.raises(
        SampleError, match=r"sizes\.xlsx.*: found two columns for one size, .* expected one; take one out"
    ):
        table(read, heads, [[1.0] * len(heads)] * 6)


def cumulative(group, cells):
    head = [
        ["Sample", "Lat", "Long", group, *[""] * 5],
        ["", "", "", "-2 phi", "-1 phi", "0 phi", "1 phi", "3 phi", "4 phi"],
    ]
    return head + [[f"K{i}", 54.101 + i / 100, 3.201 + i / 100, *cells] for i in range(6)]


@pytest.mark.parametrize("group", ["Cumulative % retained", "Cum. wt % coarser", "cumulative %", "% acumulado"])
def test_a_group_heading_says_that_sizes_are_cumulative(read, group):
    table = read(cumulative(group, [0, 3, 10, 30, 70, 88])).table
    np.testing.assert_allclose(table[["mud", "sand", "gravel"]], [[0.12, 0.85, 0.03]] * 6, atol=1e-12)


def test_cumulative_from_the_fine_end_is_told_by_the_numbers(read):
    stations = read(cumulative("cumulative %", [100, 97, 90, 70, 30, 12]))
    np.testing.assert_allclose(stations.table[["mud", "sand", "gravel"]], [[0.12, 0.85, 0.03]] * 6, atol=1e-12)
    assert any("fall to the fine end: read as passing" in note for note in stations.notes)


def test_percents_that_sum_to_anything_are_no_weights(read):
    with pytest.raises(SampleError, match=r"size classes sum to 201, expected 100 ± 2"):
        read(cumulative("% retained", [0, 3, 10, 30, 70, 88]))
