"""Cores: what lies above the surface depth is the sample, what lies below is kept beside it."""

import numpy as np
import pandas as pd

from tests.stations.samples import HEADER, ROWS
from texture.stations import write_tables

HEAD = [*HEADER, "Top (cm)", "Bottom (cm)"]


def cores():
    core = [
        ["A1", 54.101, 3.201, 50, 50, 0, "", 0, 5],
        ["A1", 54.101, 3.201, 20, 80, 0, "", 5, 15],
        ["A1", 54.101, 3.201, 10, 40, 50, "recovered 35 of 60 cm", 15, 35],
        ["A1", 54.101, 3.201, "", "", "", "ended in stiff clay", 35, 36],
    ]
    return [HEAD, *core, *[[*r, 0, 10] for r in ROWS[1:]]]


def test_the_surface_is_weighted_by_thickness_and_deeper_intervals_are_kept(read):
    stations = read(cores(), "cores.xlsx")
    top = stations.table.set_index("id").loc["A1"]
    # 0-5 cm and the upper 5 cm of 5-15 cm, above a surface layer of 10 cm: half and half
    np.testing.assert_allclose([top["mud"], top["sand"], top["gravel"]], [0.35, 0.65, 0.0])
    assert top["repeats"] == 1
    deeper = stations.deeper
    assert deeper["row"].tolist() == [3, 4, 5]
    np.testing.assert_allclose(deeper[["top_m", "bottom_m"]].astype(float), [[0.05, 0.15], [0.15, 0.35], [0.35, 0.36]])
    np.testing.assert_allclose(deeper["gravel"].astype(float), [0.0, 0.5, np.nan])
    assert deeper["note"].tolist() == ["", "recovered 35 of 60 cm", "ended in stiff clay"]
    assert stations.counts["rows_set_aside"] == 2
    assert stations.counts["rows_merged"] == 1


def test_deeper_intervals_follow_the_surface_depth(read):
    assert read(cores(), "cores.xlsx", intake={"surface_m": 0.4}).deeper.empty
    deep = read(cores(), "cores.xlsx", intake={"surface_m": 0.05})
    assert deep.deeper["row"].tolist() == [3, 4, 5, 6, 7, 8, 9, 10]  # the grabs reach to 10 cm
    assert deep.table.set_index("id").loc["A1", "mud"] == 0.5


def test_deeper_intervals_are_written_where_there_are_any(read, tmp_path):
    assert [p.name for p in write_tables(read(cores(), "cores.xlsx"), tmp_path)][-1] == "deeper.csv"
    back = pd.read_csv(tmp_path / "deeper.csv")
    assert back["bottom_m"].tolist() == [0.15, 0.35, 0.36]
    (tmp_path / "plain").mkdir()
    assert "deeper.csv" not in {p.name for p in write_tables(read([HEADER, *ROWS]), tmp_path / "plain")}
