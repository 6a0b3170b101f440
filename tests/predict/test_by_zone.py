"""One method in several regions."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from texture.predict import Kriging
from texture.predict.by_zone import ByZone, Region
from texture.structure import Covariance, CovarianceSet, Structure

ONE = CovarianceSet([Covariance([Structure("exponential", 1.0, 50.0)])])
SILL = np.array([1.0])


def stations(seed=1, n=24):
    rng = np.random.default_rng(seed)
    points = rng.uniform(0.0, 100.0, (n, 2))
    return points, rng.normal(size=(n, 1)), np.full((n, 1), 0.1), (points[:, 0] > 50.0).astype(np.int8)


def fitted(*regions, seed=1):
    points, values, noise, zone = stations(seed)
    return ByZone(lambda: Kriging(ONE, neighbours=8), regions, SILL).fit(points, values, noise, None, zone)


@given(st.integers(0, 50))
def test_no_station_speaks_across_a_hard_edge(seed):
    points, values, noise, zone = stations(seed)
    places = np.array([[49.0, 50.0], [51.0, 50.0]])
    mean, variance, _ = fitted(Region("stations", True), seed=seed).predict(places, np.array([0, 1]), np.ones(2))
    for i in (0, 1):
        own = zone == i
        alone = Kriging(ONE, neighbours=8).fit(points[own], values[own], noise_variance=noise[own])
        expected = alone.predict(places[i : i + 1])
        np.testing.assert_array_equal(mean[i], expected[0][0])
        np.testing.assert_array_equal(variance[i], expected[1][0])


def test_outside_a_soft_edge_all_stations_are_heard():
    points, values, noise, _ = stations()
    everyone = Kriging(ONE, neighbours=8).fit(points, values, noise_variance=noise).predict(np.array([[49.0, 50.0]]))
    zoned = fitted(Region("stations", False))
    np.testing.assert_array_equal(zoned.predict(np.array([[49.0, 50.0]]), np.zeros(1, int), np.ones(1))[0], everyone[0])
    inner = zoned.predict(np.array([[49.0, 50.0]]), np.ones(1, int), np.ones(1))[0]
    half = zoned.predict(np.array([[49.0, 50.0]]), np.ones(1, int), np.full(1, 0.5))[0]
    np.testing.assert_allclose(half, (inner + everyone[0]) / 2.0)


def test_means_and_the_ladder_by_hand():
    """Weights 1 / (sill + noise) are equal: the plain mean; its variance is the sill and (sill + noise) / n more."""
    points, values, noise, zone = stations()
    mean, variance, rung = fitted(Region("mean", True)).predict(np.zeros((1, 2)), np.ones(1, int), np.ones(1))
    np.testing.assert_allclose(mean, [[values[zone == 1].mean()]])
    np.testing.assert_allclose(variance, [[1.0 + 1.1 / (zone == 1).sum()]])
    assert rung.tolist() == [1]
    few = np.zeros(len(points), dtype=np.int8)
    few[:2] = 1  # two stations: their mean; zone 2 has none: that of the whole map
    zoned = ByZone(lambda: Kriging(ONE), [Region("stations", True), Region("stations", True)], SILL)
    found, _, rung = zoned.fit(points, values, noise, None, few).predict(np.zeros((2, 2)), np.array([1, 2]), np.ones(2))
    np.testing.assert_allclose(found[:, 0], [values[:2].mean(), values.mean()])
    assert rung.tolist() == [1, 1]


def test_a_mean_knows_noise_and_surveys_by_hand():
    """Two stations of one survey and one of another, values 0, 0, 3; the offset of a survey has variance 1, bed and noise 1 each.

    The covariance is 2 on the diagonal and 1 more within a survey: weights of the three are as 1/4, 1/4, 1/3.
    """
    points, values = np.zeros((3, 2)), np.array([[0.0], [0.0], [3.0]])
    zoned = ByZone(lambda: Kriging(ONE), [Region("mean", True)], SILL, np.array([1.0]), np.array([1.0]))
    zoned.fit(points, values, np.zeros((3, 1)), np.array([0, 0, 1]), np.ones(3, dtype=np.int8))
    mean, variance, _ = zoned.predict(np.zeros((1, 2)), np.ones(1, int), np.ones(1))
    covariance = 2.0 * np.eye(3) + np.array([[1, 1, 0], [1, 1, 0], [0, 0, 1]])
    weight = np.linalg.solve(covariance, np.ones(3))
    np.testing.assert_allclose(mean, [[weight @ values[:, 0] / weight.sum()]])
    np.testing.assert_allclose(mean, [[1.0 / (1 / 4 + 1 / 4 + 1 / 3)]])
    np.testing.assert_allclose(variance, [[1.0 + 1.0 / weight.sum()]])
