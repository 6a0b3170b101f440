"""Parts to fractions of 1: unit, completion, limits, closing, refusal."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.stations.samples import HEADER, ROWS
from texture.errors import SampleError
from texture.recipe import Samples
from texture.stations.audit import AuditLog
from texture.stations.cells import read_numbers
from texture.stations.columns import Column
from texture.stations.fractions import share_out
from texture.stations.where import Where

HERE = Where("a.csv")


def share(columns, unit=None, audit=None, **settings):
    """Fractions of columns given as part → cells."""
    rows = np.arange(2, 2 + len(next(iter(columns.values()))))
    options = {k: settings.pop(k) for k in ("sum_tolerance", "detection_limit") if k in settings}
    if "forced" in settings:
        settings["unit"] = settings.pop("forced")
    block = Samples.model_validate({"file": "a.csv", **settings})
    heads = {part: Column(part, i, part.title(), unit) for i, part in enumerate(columns)}
    numbers = {part: read_numbers(cells, HERE.at(part.title()), rows) for part, cells in columns.items()}
    return share_out(numbers, columns, heads, block, HERE, rows, audit if audit is not None else AuditLog(), **options)


def table(shares):
    return np.column_stack([shares.mud, shares.sand, shares.gravel])


@pytest.mark.parametrize("scale", [1.0, 100.0, 1000.0])
def test_unit_is_told_by_the_sums(scale):
    shares = share(
        {"mud": [0.125 * scale, 0.3 * scale], "sand": [0.8 * scale, 0.7 * scale], "gravel": [0.075 * scale, 0.0]}
    )
    np.testing.assert_allclose(table(shares), [[0.125, 0.8, 0.075], [0.3, 0.7, 0.0]], atol=1e-15)


def test_sums_overrule_a_heading_that_says_what_the_spreadsheet_shows():
    shares = share({"mud": [0.125], "sand": [0.875]}, unit="percent")
    assert shares.mud[0] == 0.125
    assert "headings say percent, the sums of the rows say fractions of 1" in shares.notes[0]


def test_silt_and_clay_make_mud():
    audit = AuditLog()
    shares = share({"silt": [20.0], "clay": [10.0], "sand": [65.0], "gravel": [5.0]}, audit=audit)
    np.testing.assert_allclose(table(shares), [[0.3, 0.65, 0.05]])
    assert audit.table()["rule"].tolist() == ["silt + clay is mud"]


def test_one_missing_part_is_completed_only_when_the_whole_sample_was_seen():
    audit = AuditLog()
    np.testing.assert_allclose(
        table(share({"mud": [20.0], "sand": [70.0], "gravel": [None]}, audit=audit)), [[0.2, 0.7, 0.1]]
    )
    assert audit.table()["rule"].tolist() == ["the one missing part of a whole sample: what is left to 1"]
    shares = share({"mud": [20.0], "sand": [80.0], "gravel": [None]}, basis="below_2mm")
    np.testing.assert_allclose(table(shares), [[0.2, 0.8, np.nan]])


def test_shares_of_what_passed_2_mm_are_scaled_where_gravel_is_of_the_whole():
    shares = share({"mud": [20.0], "sand": [80.0], "gravel": [50.0]}, basis="below_2mm", unit="percent")
    np.testing.assert_allclose(table(shares), [[0.1, 0.4, 0.5]])


def test_mud_alone_stays_alone():
    shares = share({"mud": [20.0], "sand": [None], "gravel": [None]}, unit="percent")
    np.testing.assert_allclose(table(shares), [[0.2, np.nan, np.nan]])


def test_blank_means_zero_only_where_the_survey_says_so():
    shares = share({"mud": [20.0, 20.0], "sand": [80.0, None], "gravel": [None, None]}, blank_means="zero")
    np.testing.assert_allclose(table(shares)[0], [0.2, 0.8, 0.0])
    assert "parts sum to 0.2" in shares.problem[1]


# Martín-Fernández et al. (2003), multiplicative replacement of (0, .6, .4) with .0065
def test_a_limit_keeps_the_ratios_of_the_others():
    audit = AuditLog()
    shares = share({"gravel": ["<1"], "sand": [60.0], "mud": [40.0]}, audit=audit)
    np.testing.assert_allclose([shares.gravel[0], shares.sand[0], shares.mud[0]], [0.0065, 0.5961, 0.3974], atol=1e-12)
    assert audit.table()[["old", "new"]].values.tolist() == [["<1", "0.0065"], ["1.0065", "1"]]


def test_a_trace_is_half_of_the_detection_limit():
    shares = share({"gravel": ["trace"], "sand": [60.0], "mud": [40.0]}, detection_limit=0.004)
    assert shares.gravel[0] == pytest.approx(0.002, abs=1e-15)
    assert shares.sand[0] / shares.mud[0] == pytest.approx(1.5, rel=1e-14)


def test_rows_off_the_sum_are_refused_with_the_sum():
    shares = share({"mud": [20.0, 30.0, 30.5], "sand": [60.0, 70.0, 70.0], "gravel": [57.0, 0.0, 0.0]})
    assert shares.problem.tolist() == ["parts sum to 1.37, expected 1 ± 0.02", "", ""]
    assert np.isnan(shares.mud[0])
    assert shares.mud[2] == pytest.approx(0.305 / 1.005)


def test_the_odd_share_above_one_sets_its_row_aside():
    shares = share({"mud": [20.0, 30.0, 10.0], "sand": [80.0, 137.0, 90.0]}, unit="percent", basis="whole")
    assert shares.problem.tolist() == ["", 'column "Sand": 137 is more than 100 %', ""]
    assert np.isnan(shares.sand[1])
    assert shares.sand[[0, 2]].tolist() == [0.8, 0.9]


def test_a_column_of_shares_above_one_stops_with_its_first_row():
    with pytest.raises(
        SampleError,
        match=r'a\.csv, row 3, column "Sand": found 137 and 2 more like it, expected a share of at most 100 %',
    ):
        share({"mud": [20.0] * 8, "sand": [80.0, 137.0, 200.0, 300.0, *[80.0] * 4]}, unit="percent", basis="whole")


def test_percent_read_as_fractions_is_refused():
    with pytest.raises(SampleError, match='expected a share of at most 1; correct the cell, or say unit = "percent"'):
        share({"mud": [20.0, 30.0], "sand": [80.0, 70.0]}, forced="fraction")


def test_weights_become_fractions_where_all_parts_are_there():
    shares = share({"mud": [12.0, 10.0], "sand": [36.0, None], "gravel": [0.0, 5.0]}, unit="g")
    np.testing.assert_allclose(table(shares)[0], [0.25, 0.75, 0.0])
    assert shares.problem[1] == "weights need all parts to make fractions"


def test_an_unreadable_cell_names_its_column():
    shares = share({"mud": ["12.5", "12;5"], "sand": ["87.5", "87.5"]})
    assert shares.problem.tolist() == ["", 'column "Mud": cannot read "12;5"']


def test_resolution_is_the_rounding_of_the_fractions():
    assert share({"mud": [20, 31], "sand": [80, 69]}).resolution.tolist() == [0.005, 0.005]
    assert share({"mud": ["5-15", "20"], "sand": ["90", "80"]}).resolution.tolist() == [0.05, 0.005]


@given(st.lists(st.tuples(st.integers(0, 1000), st.integers(0, 1000)), min_size=1, max_size=20))
def test_exact_percents_come_back_exactly(pairs):
    tenths = [(min(a, 1000 - b) if a + b > 1000 else a, b) for a, b in pairs if b <= 1000]
    mud, sand = [a / 10 for a, _ in tenths], [b / 10 for _, b in tenths]
    gravel = [(1000 - a - b) / 10 for a, b in tenths]
    found = table(share({"mud": mud, "sand": sand, "gravel": gravel}, unit="percent"))
    np.testing.assert_allclose(found, [[a / 1000, b / 1000, (1000 - a - b) / 1000] for a, b in tenths], atol=1e-15)


def test_through_a_file(read):
    stations = read([HEADER, *ROWS])
    np.testing.assert_allclose(
        stations.table[["mud", "sand", "gravel"]], np.array([r[3:6] for r in ROWS]) / 100, atol=1e-15
    )
