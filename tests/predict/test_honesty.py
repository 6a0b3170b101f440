import numpy as np
import pytest

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
