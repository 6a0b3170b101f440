"""Outliers are flagged with their source row and kept."""

import numpy as np
import pytest

from tests.stations.samples import HEADER, ROWS
from texture.predict import Kriging
from texture.predict.leave_out import leave_out
from texture.stations import write_tables
from texture.stations.outliers import flag_outliers
from texture.structure import Covariance, CovarianceSet, Structure


def test_the_worst_coordinate_speaks_and_four_is_still_allowed(read):
    table = read([HEADER, *ROWS]).table
    z = np.zeros((6, 2))
    z[0], z[1], z[2], z[3] = (4.0, -4.0), (4.1, -7.0), (np.nan, 5.0), (np.nan, np.nan)
    worst, audit = flag_outliers(table, z, ["mud", "gravel"])
    np.testing.assert_array_equal(worst, [4.0, -7.0, 5.0, np.nan, 0.0, 0.0])
    assert audit[["row", "column", "new"]].to_numpy().tolist() == [[3, "gravel", "-7"], [4, "gravel", "5"]]
    assert audit["rule"][0].startswith("flagged, not dropped: more than 4 standard errors")
    with pytest.raises(ValueError, match="found errors of 2 stations, expected 6"):
        flag_outliers(table, [1.0, 2.0])


def test_flags_are_listed_written_and_drop_nothing(read, tmp_path):
    stations = read([HEADER, *ROWS])
    assert stations.outliers.empty
    flagged = stations.with_outliers([5.0, -6.0], rows=[4, 1])
    assert flagged.outliers[["id", "row", "held_out_z"]].to_numpy().tolist() == [["A2", 3, -6.0], ["A5", 6, 5.0]]
    assert flagged.counts == stations.counts
    assert len(flagged.audit) == len(stations.audit) + 2
    write_tables(flagged, tmp_path)
    assert "held_out_z" in (tmp_path / "stations.csv").read_text().splitlines()[0]


def test_one_swapped_sample_stands_out_among_its_neighbours(read):
    rng = np.random.default_rng(5)
    lon, lat = 3.2 + 0.2 * rng.random(120), 54.1 + 0.1 * rng.random(120)
    logit = 2.0 * np.sin(30.0 * lon) + rng.normal(0.0, 0.2, 120)
    mud = 100.0 / (1.0 + np.exp(-logit))
    mud[17] = 0.5 if mud[17] > 50.0 else 99.5
    rows = [[f"S{i}", lat[i], lon[i], round(m, 1), round(100.0 - m, 1), 0, ""] for i, m in enumerate(mud)]
    stations = read([HEADER, *rows])
    share = stations.table["mud"].to_numpy()
    values = np.log(share / (1.0 - share))[:, None]
    points = np.column_stack([65_000.0 * (lon - 3.2), 111_000.0 * (lat - 54.1)])
    models = CovarianceSet([Covariance([Structure("matern", 2.0, 6000.0, 1.5)], noise=0.05)])
    kriging = Kriging(models, neighbours=None).fit(points, values)
    mean, variance = leave_out(kriging)
    flagged = stations.with_outliers((values - mean) / np.sqrt(variance))
    assert "S17" in flagged.outliers["id"].tolist()[:1]
    assert len(flagged) == 120
