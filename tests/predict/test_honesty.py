import numpy as np
import pytest

from benchmarks.kernel import MODELS, stations
from texture.predict import Kriging
from texture.predict.honesty import neighbourhood_honesty
from texture.structure import Covariance, Structure


def test_all_stations_are_honest_and_fewer_less_so():
    rng = np.random.default_rng(0)
    points, cells = rng.random((500, 2)) * 1000.0, rng.random((300, 2)) * 1000.0
    c = Covariance([Structure("exponential", 1.0, 500.0)], noise=0.2)
    z = np.linalg.cholesky(c.matrix(points) + 0.2 * np.eye(500)) @ rng.normal(size=500)
    z = np.column_stack([z, -z])
    z[::4, 1] = np.nan
    drift = points[:, 0]
    full = neighbourhood_honesty(Kriging(c, None).fit(points, z, drift=drift), cells, 1, drift=cells[:, 0])
    assert (full.places, full.stations) == (100, 500)
    assert full.largest < 1e-10
    assert full.variance_ratio == pytest.approx(1.0, abs=1e-10)
    many, few = (neighbourhood_honesty(Kriging(c, k).fit(points, z), cells, 1) for k in (32, 4))
    assert 0.0 < many.rms < 0.04 < few.rms
    assert 1.0 < many.variance_ratio < few.variance_ratio
    assert "kriging standard deviations" in str(many)


def test_the_reference_is_the_nearest_stations():
    rng = np.random.default_rng(3)
    points, z, cells = rng.random((400, 2)), rng.normal(size=400), rng.random((20, 2))
    c = Covariance([Structure("exponential", 1.0, 0.5)], noise=0.2)
    k = Kriging(c, 40, "nearest").fit(points, z)
    assert neighbourhood_honesty(k, cells, 1, stations=40).largest < 1e-10


@pytest.mark.slow
@pytest.mark.parametrize("layout", ["uniform", "clusters"])
def test_honest_at_held_out_stations(layout):
    # 18,000 stations kept, a seeded 20 of 2,000 held out compared for two models: within 0.03 kriging standard deviations
    # of the answer of their 2,000 nearest, and the variance says so.
    points, values = stations(20_000, layout)
    held = np.zeros(20_000, dtype=bool)
    held[np.random.default_rng(9).permutation(20_000)[:2000]] = True
    found = neighbourhood_honesty(Kriging(MODELS).fit(points[~held], values[~held]), points[held], 1, count=20)
    assert (found.places, found.stations) == (20, 2000)
    assert 0.0 < found.rms < 0.03
    assert 1.0 <= found.variance_ratio < 1.005
