"""Old samples: noise that grows with age, and places where they are void."""

import numpy as np
import pytest

from tests.stations.samples import HEADER, ROWS
from texture.composition import LogRatio
from texture.observations import observe
from texture.structure.plane import Plane

DATES = ["1984-01-01", "2004-01-01", "1994-01-01", "", "2004-01-01", "2004-01-01"]
DATED = [[*HEADER, "Date"], *[[*r, d] for r, d in zip(ROWS, DATES, strict=True)]]


def test_noise_grows_with_age_and_the_undated_count_as_oldest(read):
    stations = read(DATED, intake={"noise_per_decade": 0.02})
    # half a tenth of a percent as typed; two decades add 4 %, one 2 %
    expected = np.hypot(0.0005, [0.04, 0.0, 0.02, 0.04, 0.0, 0.0])
    np.testing.assert_allclose(stations.table["resolution"], expected, atol=2e-5)
    assert any("up to ± 0.04; 1 undated ones count as the oldest" in note for note in stations.notes)
    logratio = LogRatio(["mud", "sand", "gravel"])
    plane = Plane.choose(stations.table["longitude"].to_numpy(), stations.table["latitude"].to_numpy(), None)
    new, old = (observe(s, logratio, plane).coordinates(logratio)[1][:, 0] for s in (read(DATED), stations))
    assert (old >= new).all()
    assert old[0] > 100.0 * new[0]
    assert old[1] == new[1]


def test_limits_move_apart_with_age(read):
    rows = [list(r) for r in DATED]
    rows[1][3] = "10-15"
    low, high = read(rows, intake={"noise_per_decade": 0.02}).table.loc[0, ["mud_low", "mud_high"]]
    assert (low, high) == (pytest.approx(0.06, abs=1e-5), pytest.approx(0.19, abs=1e-5))
