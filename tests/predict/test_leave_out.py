import numpy as np
import pytest

from texture.errors import StructureError
from texture.predict import Kriging
from texture.predict.leave_out import leave_out
from texture.structure import Covariance, Structure

SPHERICAL = Covariance([Structure("spherical", 0.59, 897.0)], small_scale=0.05)


def summary(mean, variance, z):
    error = mean - z
    return (
        abs(error.mean()), np.sqrt((error**2).mean()), np.abs(error).mean(), (error**2 / variance).mean(),
        np.corrcoef(mean, z)[0, 1],
    )  # fmt: skip


def test_meuse_summaries(meuse):
    # R gstat 2.1 on the models of its documentation, no refit; columns |ME|, RMSE, MAE, mean error^2/variance, r.
    mean, variance = leave_out(Kriging(SPHERICAL, None).fit(meuse.points, meuse.log_zinc))
    found = summary(mean[:, 0], variance[:, 0], meuse.log_zinc)
    assert found == pytest.approx((0.000013, 0.391749, 0.292101, 0.822763, 0.839386), abs=1e-5)
    single = [
        (0, 6.7691822, 0.1800190),
        (1, 6.7672959, 0.1747339),
        (49, 5.3164958, 0.1606084),
        (154, 6.3464478, 0.5417640),
    ]
    for i, m, v in single:
        assert (mean[i, 0], variance[i, 0]) == pytest.approx((m, v), abs=1e-5)
    drift = Kriging(Covariance([Structure("spherical", 0.15, 900.0)], 0.05), None)
    mean, variance = leave_out(drift.fit(meuse.points, meuse.log_zinc, drift=meuse.root_distance))
    found = summary(mean[:, 0], variance[:, 0], meuse.log_zinc)
    assert found == pytest.approx((0.003515, 0.376039, 0.267588, 1.502994, 0.852852), abs=1e-5)
    folds = np.arange(155) % 5
    mean, variance = leave_out(Kriging(SPHERICAL, None).fit(meuse.points, meuse.log_zinc), folds)
    found = summary(mean[:, 0], variance[:, 0], meuse.log_zinc)
    assert found[1:] == pytest.approx((0.392021, 0.285857, 0.806146, 0.838802), abs=1e-5)


def test_meuse_sixteen_nearest(meuse):
    # R gstat 2.1, leave-one-out from the 16 nearest of the others, no refit: RMSE, MAE, mean error^2/variance, r.
    mean, variance = np.empty(155), np.empty(155)
    for i in range(155):
        rest = np.arange(155) != i
        k = Kriging(SPHERICAL, 16, "nearest").fit(meuse.points[rest], meuse.log_zinc[rest])
        value, spread = k.predict(meuse.points[i : i + 1])
        mean[i], variance[i] = value[0, 0], spread[0, 0]
    found = summary(mean, variance, meuse.log_zinc)
    assert found[1:] == pytest.approx((0.389825, 0.286983, 0.808015, 0.841042), abs=1e-5)


@pytest.mark.parametrize("groups", [None, [0, 0, 1, 1, 1, 2, 3, 3, 3, 3, 4, 5, 5, 6, 6, 6, 6, 7, 8, 8]])
def test_equal_to_really_leaving_them_out(groups):
    # Dubrule (1983); Ginsbourger & Schärer (2024): equal to brute force to 1e-9.
    rng = np.random.default_rng(0)
    points, z, drift = rng.random((20, 2)) * 50.0, rng.normal(size=(20, 2)), rng.random(20)
    z[3, 1] = np.nan
    noise = rng.random(20)
    c = Covariance([Structure("exponential", 1.0, 60.0)], small_scale=0.1, noise=0.2)
    mean, variance = leave_out(Kriging(c, None).fit(points, z, noise_variance=noise, drift=drift), groups)
    assert np.isnan(mean[3, 1])
    labels = np.arange(20) if groups is None else np.array(groups)
    for g in np.unique(labels):
        out, rest = labels == g, labels != g
        k = Kriging(c, None).fit(points[rest], z[rest], noise_variance=noise[rest], drift=drift[rest])
        brute = k.predict(points[out], drift=drift[out])[0]
        spread = k.sample_variance(points[out], drift=drift[out], noise_variance=noise[out])
        known = np.isfinite(z[out])
        assert mean[out][known] == pytest.approx(brute[known], abs=1e-9)
        assert variance[out][known] == pytest.approx(spread[known], abs=1e-9)


def test_in_tiles_each_station_leaves_its_own_tile():
    rng = np.random.default_rng(1)
    points, z = rng.random((400, 2)) * 1000.0, rng.normal(size=400)
    c = Covariance([Structure("exponential", 1.0, 600.0)], noise=0.2)
    k = Kriging(c, 12).fit(points, z)
    mean, variance = leave_out(k)
    for i in range(0, 400, 37):
        expected = np.zeros(2)
        for rows, weight in k.neighbourhoods_of(points[i]):
            others = rows[rows != i]
            alone = Kriging(c, None).fit(points[others], z[others])
            value, spread = alone.predict(points[i][None])[0], alone.sample_variance(points[i][None])
            expected += weight * np.array([value[0, 0], spread[0, 0]])
        assert [mean[i, 0], variance[i, 0]] == pytest.approx(expected, abs=1e-9)


def test_in_tiles_coincident_and_smooth_stations():
    # Exact samples at one place tell one another: without one of them its value is still known.
    rng = np.random.default_rng(3)
    points = rng.random((150, 2)) * 1000.0
    points[100:] = points[:50]
    z = np.sin(points[:, 0] / 150.0) + points[:, 1] / 500.0
    mean, variance = leave_out(Kriging(Covariance([Structure("exponential", 1.0, 600.0)]), 12).fit(points, z))
    twice = np.r_[0:50, 100:150]
    assert mean[twice, 0] == pytest.approx(z[twice], abs=1e-6)
    assert variance[twice, 0] == pytest.approx(0.0, abs=1e-9)
    assert (variance[50:100, 0] > 0.01).all()
    # A model so smooth that its matrix is singular to rounding answers for every station all the same.
    with pytest.warns(match="Gaussian|gaussian"):
        smooth = Kriging(Covariance([Structure("gaussian", 1.0, 2000.0)]), 12).fit(points[:100], z[:100])
    mean, _ = leave_out(smooth)
    assert np.abs(mean[:, 0] - z[:100]).max() < 0.5


def test_more_stations_at_one_place_than_a_neighbourhood_holds():
    rng = np.random.default_rng(4)
    points, z = rng.random((700, 2)) * 1000.0, rng.normal(size=700)
    points[:500] = [300.0, 400.0]
    mean, variance = leave_out(Kriging(Covariance([Structure("exponential", 1.0, 600.0)], noise=0.5), 4).fit(points, z))
    assert np.isfinite(mean).all()
    # Hundreds of neighbours at the place itself: the error's variance is the sample's own noise and little more.
    assert (variance[:500, 0] > 0.5).all()
    assert (variance[:500, 0] < 0.56).all()


@pytest.mark.parametrize("size", [3, 20])
def test_in_tiles_a_sample_tells_nothing_of_its_own_survey(size):
    # Surveys of a few samples each: an offset that knows the left-out sample makes errors a quarter too small for three.
    rng = np.random.default_rng(1)
    points, survey = rng.random((300, 2)) * 1000.0, np.arange(300) // size
    c = Covariance([Structure("exponential", 1.0, 300.0)], small_scale=0.05, noise=0.1, survey=0.5)
    same = survey[:, None] == survey[None, :]
    z = np.linalg.cholesky(c.matrix(points) + 0.1 * np.eye(300) + 0.5 * same) @ rng.normal(size=300)
    rms, square = [], []
    for neighbours in (16, None):
        mean, variance = leave_out(Kriging(c, neighbours).fit(points, z, survey=survey))
        rms.append(np.sqrt(np.mean((mean[:, 0] - z) ** 2)))
        square.append(np.mean((mean[:, 0] - z) ** 2 / variance[:, 0]))
    assert rms[0] == pytest.approx(rms[1], rel=0.06)
    assert square[0] == pytest.approx(square[1], rel=0.15)


def test_what_the_rest_cannot_support_is_nan():
    points, z = np.arange(5.0)[:, None], np.array([1.0, 2, 3, 4, 5])
    k = Kriging(Covariance([], 1.0), None).fit(points, z, drift=[0.0, 0, 0, 0, 1])
    mean, _ = leave_out(k)
    assert np.isfinite(mean[:4]).all()
    assert np.isnan(mean[4, 0])  # the only station that tells the drift's slope


def test_errors():
    points, z = np.random.default_rng(2).random((30, 2)), np.arange(30.0)
    with pytest.raises(StructureError, match="works with all stations or tiles"):
        leave_out(Kriging(SPHERICAL, 5, "nearest").fit(points, z))
    with pytest.raises(StructureError, match="groups need neighbours=None"):
        leave_out(Kriging(SPHERICAL, 5).fit(points, z), np.zeros(30))
    with pytest.raises(StructureError, match=r"found shape \(2,\), expected \(30,\)"):
        leave_out(Kriging(SPHERICAL, None).fit(points, z), [1, 2])
