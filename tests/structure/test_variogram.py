import numpy as np
import pytest

from texture.errors import StructureError
from texture.structure import Covariance
from texture.structure import variogram as module
from texture.structure.variogram import empirical_variogram, fit_variogram

LINE = np.arange(5.0)[:, None]
VALUES = np.array([1.0, 3.0, 2.0, 5.0, 4.0])
EDGES = np.arange(5) + 0.5


def test_by_hand():
    # Matheron (1963); Cressie & Hawkins (1980) without their term in 1/N^2, as R gstat computes it.
    matheron = empirical_variogram(LINE, VALUES, EDGES, "matheron")
    assert matheron.pairs.tolist() == [4, 3, 2, 1]
    assert matheron.semivariance.tolist() == [1.875, 1.5, 4.25, 4.5]
    robust = empirical_variogram(LINE, VALUES, EDGES, "cressie_hawkins").semivariance
    assert robust == pytest.approx([2.359914, 2.133089, 3.595526, 4.731861], abs=1e-6)
    # Dowd (1984): 2.198 median^2 / 2, of the differences (2,1,3,1), (1,2,2), (4,1) and (3).
    dowd = empirical_variogram(LINE, VALUES, EDGES, "dowd").semivariance
    assert dowd == pytest.approx(1.099 * np.array([1.5, 2.0, 2.5, 3.0]) ** 2)


def test_meuse_variogram_and_fit(meuse):
    # gstat documentation (Pebesma); recomputed with R gstat 2.1: pairs exact, semivariance 1e-6, parameters 1 %.
    cutoff = np.linalg.norm(np.ptp(meuse.points, axis=0)) / 3.0
    v = empirical_variogram(meuse.points, meuse.log_zinc, np.linspace(0.0, cutoff, 16), "matheron")
    assert v.pairs.tolist() == [57, 299, 419, 457, 547, 533, 574, 564, 589, 543, 500, 477, 452, 457, 415]
    expected = (
        0.1234479, 0.2162185, 0.3027859, 0.4121448, 0.4634128, 0.5646933, 0.5689683, 0.6186769, 0.6471479, 0.6915705,
        0.7033984, 0.6038770, 0.6517158, 0.5665318, 0.5748227,
    )  # fmt: skip
    assert v.semivariance == pytest.approx(expected, abs=1e-6)
    published = {
        "pairs_over_square_distance": (0.05066, 0.59061, 897.02),
        "equal": (0.0534, 0.5794, 890.2),
        "pairs": (0.0651, 0.5711, 911.0),
    }
    for weights, (nugget, sill, range_m) in published.items():
        c, loss = fit_variogram(v, "spherical", weights=weights)
        found = (c.small_scale, c.structures[0].sill, c.structures[0].range_m)
        assert found == pytest.approx((nugget, sill, range_m), rel=0.01)
        if weights == "pairs_over_square_distance":
            assert loss == pytest.approx(9.0112e-6, rel=1e-4)


def test_robust_estimators_bear_outliers_and_agree_without():
    rng = np.random.default_rng(4)
    points, values = rng.random((400, 2)) * 1000.0, rng.normal(size=400)
    values /= values.std()
    edges = np.linspace(0.0, 500.0, 6)
    clean = {
        e: empirical_variogram(points, values, edges, e).semivariance for e in ("matheron", "cressie_hawkins", "dowd")
    }
    for gamma in clean.values():
        assert gamma == pytest.approx(1.0, rel=0.1)
    values[:8] += 15.0
    spoilt = {e: empirical_variogram(points, values, edges, e).semivariance for e in clean}
    assert (spoilt["matheron"] > 3.0).all()
    assert (spoilt["cressie_hawkins"] < 1.8).all()
    assert (spoilt["dowd"] < 1.3).all()


def test_pairs_are_sampled_when_there_are_too_many(monkeypatch):
    rng = np.random.default_rng(5)
    points = rng.random((1500, 2)) * 1000.0
    values = np.sin(points[:, 0] / 80.0) + rng.normal(size=1500) * 0.2
    edges = np.linspace(0.0, 400.0, 9)
    full = empirical_variogram(points, values, edges)
    monkeypatch.setattr(module, "MOST_PAIRS", 200_000)
    sampled = empirical_variogram(points, values, edges, seed=1)
    again = empirical_variogram(points, values, edges, seed=1)
    assert np.array_equal(sampled.semivariance, again.semivariance)
    assert sampled.pairs.sum() < full.pairs.sum() / 2
    # Nearest pairs are taken more often, so a class's mean distance may lie lower, and with it the semivariance.
    expected = np.interp(sampled.distance_m, full.distance_m, full.semivariance)
    assert sampled.semivariance == pytest.approx(expected, rel=0.06)


def test_pairs_across_surveys_are_left_out():
    values = VALUES + np.array([0.0, 100.0, 0.0, 100.0, 0.0])
    v = empirical_variogram(LINE, values, EDGES, "matheron", survey=[0, 1, 0, 1, 0])
    assert v.distance_m.tolist() == [2.0, 4.0]
    assert v.semivariance.tolist() == [(1 + 4 + 4) / 6, 4.5]


def test_a_falling_variogram_has_no_structure():
    v = module.EmpiricalVariogram(np.array([1.0, 2, 3]), np.array([3.0, 2, 1]), np.array([9, 9, 9]), "matheron")
    assert fit_variogram(v)[0].structures == ()


def test_errors():
    with pytest.raises(StructureError, match="found 'madogram', expected matheron"):
        empirical_variogram(LINE, VALUES, EDGES, "madogram")
    with pytest.raises(StructureError, match="found 1 stations with a value, expected at least 2"):
        empirical_variogram(LINE, [1.0] + [np.nan] * 4)


def test_stations_with_no_pair_near_enough_are_one_clear_line():
    points, values = [[0.0, 0.0], [1000.0, 0.0], [0.0, 1000.0]], np.array([[0.1, 0.2], [0.5, 0.1], [0.3, 0.4]])
    with pytest.raises(StructureError, match="no two stations"):
        Covariance.fit(points, values)
