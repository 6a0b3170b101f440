"""The law of conservation, changes, and tables that are safe to open."""

import dataclasses

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest

from tests.stations.samples import HEADER, ROWS
from texture.errors import OutputError, SampleError
from texture.stations import write_tables

EXTRA = [
    ["A1b", *ROWS[0][1:3], 32.5, 60.0, 7.5, ""],
    ["=cmd()", 54.2, 3.3, "", "", "", "rock"],
    ["A8", 54.3, 3.4, "-", "", "", "@home"],
]


@pytest.fixture
def stations(read):
    return read([HEADER, *ROWS, *EXTRA])


@pytest.mark.parametrize(
    "break_it",
    [
        lambda s: {"ledger": s.ledger.iloc[:-1]},
        lambda s: {"ledger": pd.concat([s.ledger, s.ledger.iloc[[0]]])},
        lambda s: {"ledger": s.ledger.assign(fate="used")},
        lambda s: {"table": s.table.iloc[:-1]},
        lambda s: {"rows_read": {k: v + 1 for k, v in s.rows_read.items()}},
        lambda s: {"ledger": s.ledger.assign(fate=s.ledger["fate"].replace("merged", "forgotten"))},
        lambda s: {"table": s.table.assign(kind="sieve")},
    ],
)
def test_a_broken_account_raises(stations, break_it):
    with pytest.raises(SampleError, match="does not add up"):
        dataclasses.replace(stations, **break_it(stations))


def test_the_accounts_agree_for_each_sheet(stations):
    account = stations.accounts.iloc[0]
    assert account["rows_read"] == 10
    assert account[["used", "merged", "evidence", "set_aside", "not_samples"]].tolist() == [6, 1, 1, 1, 1]


def test_setting_a_station_aside_takes_its_repeats_along(stations):
    drop = np.arange(len(stations)) == 0
    fewer = stations.with_changes(drop=drop, reason="on land, no wet cell within one cell")
    assert len(fewer) == len(stations) - 1
    assert fewer.counts["rows_set_aside"] == stations.counts["rows_set_aside"] + 2
    assert fewer.counts["rows_read"] == stations.counts["rows_read"]
    assert fewer.table["id"].iloc[0] == "A2"
    assert len(stations) == 7  # the first object is as it was


def test_moving_a_station_is_audited_and_moves_its_point(stations):
    changed = np.arange(len(stations)) == 2
    moved = stations.with_changes(
        {"longitude": np.full(len(stations), 3.5)}, changed, "on land: moved to the nearest wet cell"
    )
    assert moved.table.geometry.iloc[2].x == 3.5
    assert moved.table["longitude"].iloc[1] == stations.table["longitude"].iloc[1]
    new = moved.audit[moved.audit["rule"].str.startswith("on land")]
    assert new[["file", "row", "column", "old", "new"]].values.tolist() == [
        ["survey.csv", 4, "longitude", "3.223", "3.5"]
    ]


def test_changes_need_their_words(stations):
    some = np.arange(len(stations)) == 0
    with pytest.raises(ValueError, match="only with a reason"):
        stations.with_changes(drop=some)
    with pytest.raises(ValueError, match="a rule for the audit"):
        stations.with_changes({"longitude": np.zeros(len(stations))}, some)


def test_written_tables_come_back_and_start_no_formula(stations, tmp_path):
    paths = write_tables(stations, tmp_path)
    assert [p.name for p in paths] == ["stations.csv", "stations.gpkg", "audit.csv", "rows.csv"]
    table = pd.read_csv(paths[0], keep_default_na=False, dtype=str)
    assert list(table.columns[:11]) == [
        "id",
        "survey",
        "longitude",
        "latitude",
        "mud",
        "sand",
        "gravel",
        "kind",
        "file",
        "sheet",
        "row",
    ]
    assert [float(v) for v in table["mud"][:6]] == stations.table["mud"].tolist()[:6]
    assert table["mud"][6] == ""
    rows = pd.read_csv(paths[3], keep_default_na=False)
    assert list(rows.columns) == ["file", "sheet", "row", "id", "fate", "reason"]
    assert len(rows) == stations.counts["rows_read"]
    assert (rows["reason"][rows["fate"] == "set_aside"] != "").all()
    again = gpd.read_file(paths[1])
    assert again.crs.to_epsg() == 4326
    np.testing.assert_array_equal(again.geometry.x, stations.table["longitude"])
    for path in (paths[0], paths[2]):
        for text in pd.read_csv(path, keep_default_na=False, dtype=str).to_numpy().ravel():
            assert not text.startswith(("=", "+", "@", "-")) or _is_number(text), text
    assert table["id"][6] == "'=cmd()"


def _is_number(text):
    try:
        float(text)
    except ValueError:
        return False
    return True


def test_a_folder_that_is_not_there(stations, tmp_path):
    with pytest.raises(OutputError, match="the station tables cannot be written"):
        write_tables(stations, tmp_path / "none")
