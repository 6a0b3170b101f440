"""Certificates: a file for each sample, forms that are none, and what is said when there are none."""

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.stations.samples import HEADER, ROWS, as_csv, recipe_for
from texture.errors import SampleError
from texture.stations import read_samples
from texture.stations.certificates import gather_certificates
from texture.stations.files import Sheet

SIEVES = [["Sieve (mm)", "Retained (g)"]]


def form(row):
    grams = [[2, row[5]], [0.25, 0.0], [0.063, row[4]], ["pan", row[3]]]
    return [["Sample:", row[0]], ["Latitude", row[1]], ["Longitude", row[2]], *SIEVES, *grams]


def test_one_file_for_each_sample(tmp_path):
    blocks = []
    for row in ROWS:
        path = tmp_path / f"{row[0]}.csv"
        path.write_text(as_csv(form(row)))
        blocks.append({"file": path, "survey": "forms"})
    stations = read_samples(recipe_for(*blocks))
    assert stations.table["id"].tolist() == [r[0] for r in ROWS]
    assert stations.table["mud"].tolist() == pytest.approx([r[3] / 100 for r in ROWS])
    assert stations.counts["rows_used"] == 6


def test_a_table_of_samples_is_no_certificate():
    for rows in ([HEADER, *ROWS], [list(c) for c in zip(HEADER, *ROWS, strict=True)]):
        sheets = [Sheet("a.xlsx", "One", rows), Sheet("a.xlsx", "Two", rows)]
        assert gather_certificates(sheets, forced=True) == sheets


def test_a_layout_that_is_not_there_is_refused(read):
    with pytest.raises(SampleError, match=r'survey\.csv: no certificates found, expected labels such as "Sample"'):
        read([HEADER, *ROWS], block={"layout": "certificates"})


def test_a_row_to_skip_beyond_the_sheet_is_refused(read):
    with pytest.raises(SampleError, match="found skip = 70 in the recipe, expected numbers up to 7; correct skip"):
        read([HEADER, *ROWS], block={"skip": [70]})


def test_a_message_names_the_certificate(tmp_path, read):
    stacked = [line for r in ROWS for line in [*form(r), []]]
    stacked[7][1] = "12;5"
    stations = read(stacked)
    assert stations.set_aside["row"].tolist() == [1]
    assert 'column "pan (g)": cannot read "12;5"' in stations.set_aside["reason"][0]


line = st.lists(
    st.sampled_from(
        [
            "Sample",
            "Latitude",
            "Sieve (mm)",
            "Retained (g)",
            "Mud",
            "Total",
            "pan",
            "A9",
            54.2,
            3.1,
            2,
            0.5,
            "<1",
            "x: y",
        ]
    ),
    max_size=4,
)


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.integers(0, 47), st.lists(line, max_size=4))
def test_whatever_stands_between_certificates_no_row_is_lost(read, place, extra):
    lines = [line for r in ROWS for line in [*form(r), []]]
    try:
        stations = read([*lines[:place], *extra, *lines[place:]])
        said = ""
    except SampleError as error:
        said = str(error)
    if said:
        assert said.startswith("survey.csv")
        return
    counts = stations.counts
    fates = ("rows_used", "rows_merged", "rows_evidence", "rows_set_aside", "rows_not_samples")
    assert counts["rows_read"] == sum(counts[f] for f in fates)
    whole = stations.samples[["mud", "sand", "gravel"]].dropna().to_numpy()
    assert abs(whole.sum(axis=1) - 1.0).max(initial=0.0) < 1e-9


def test_german_certificates_stacked_on_one_sheet(read):
    rows = [["Prüfbericht Korngrößenanalyse"], []]
    for i in range(6):
        rows += [
            ["Probe:", f"P{i}"],
            ["Breite:", f"54° 1{i},30' N"],
            ["Länge:", f"7° 2{i},10' O"],
            ["Wassertiefe (m):", 18],
        ]
        rows += [
            ["Sieb (mm)", "Rückstand (g)"],
            [2, 5],
            [1, 10],
            [0.25, 40],
            [0.063, 35],
            ["< 0,063", 10],
            ["Summe", 100],
            [],
        ]
    table = read(rows, "bericht.xlsx").table
    assert table["id"].tolist() == [f"P{i}" for i in range(6)]
    np.testing.assert_allclose(table[["mud", "sand", "gravel"]], [[0.10, 0.85, 0.05]] * 6)
    assert table["longitude"][0] == pytest.approx(7 + 20.1 / 60)  # Ost
    assert (table["depth_m"] == 18.0).all()
