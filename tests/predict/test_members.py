"""Members by Matheron's rule: their mean, variance and covariance are kriging's, and stations are honoured."""

from __future__ import annotations

import numba
import numpy as np
import pytest
from threadpoolctl import threadpool_limits

from texture.composition import LogRatio, class_numbers, class_odds
from texture.errors import StructureError
from texture.predict import Kriging
from texture.predict.members import Members
from texture.structure import Covariance, CovarianceSet, Structure

SAME = CovarianceSet(
    [
        Covariance([Structure("exponential", 1.0, 400.0)], small_scale=0.2),
        Covariance([Structure("exponential", 2.0, 400.0)], small_scale=0.4),
    ],
    [[1.0, 0.6], [0.6, 1.0]],
)
OTHER = CovarianceSet(
    [
        Covariance([Structure("exponential", 1.0, 400.0)], small_scale=0.2, noise=0.1),
        Covariance([Structure("matern", 2.0, 300.0, 1.5)], small_scale=0.1),
    ],
    [[1.0, -0.5], [-0.5, 1.0]],
)
COUNT = 1600


@pytest.fixture(scope="module")
def stations() -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(3)
    points, values = rng.uniform(0.0, 1000.0, (50, 2)), rng.normal(size=(50, 2))
    values[5, 1] = np.nan
    return points, values


@pytest.fixture(scope="module")
def places() -> np.ndarray:
    return np.random.default_rng(8).uniform(0.0, 1000.0, (60, 2))


@pytest.mark.parametrize("structure", [SAME, OTHER], ids=["one model", "two models"])
def test_mean_and_variance_are_krigings(stations, places, structure):
    kriging = Kriging(structure).fit(*stations)
    mean, variance = kriging.predict(places)
    drawn = Members(kriging, range(1, COUNT + 1), seed=2).predict(places)
    # Monte Carlo: the mean of 1,600 members has the standard error sqrt(variance / 1600), a variance one of sqrt(2 / 1600) = 0.035.
    z = (drawn.mean(axis=2) - mean) / np.sqrt(variance / COUNT)
    assert np.abs(z).max() < 4.5
    ratio = drawn.var(axis=2) / variance
    assert np.abs(ratio - 1.0).max() < 4.5 * 0.035
    # On average over 60 places, most of that is gone; what is left is the spectral method's own error.
    assert ratio.mean(axis=0) == pytest.approx(1.0, abs=0.02)


def test_kriging_errors_are_correlated_as_fitted(stations, places):
    kriging = Kriging(SAME).fit(stations[0], np.random.default_rng(4).normal(size=(50, 2)))
    drawn = Members(kriging, range(1, COUNT + 1)).predict(places)
    found = [np.corrcoef(drawn[i])[0, 1] for i in range(len(places))]
    # One correlation of 1,600 pairs is known to (1 - 0.36) / sqrt(1600) = 0.016.
    assert np.mean(found) == pytest.approx(0.6, abs=0.01)
    assert np.abs(np.array(found) - 0.6).max() < 0.05


def test_member_covariance_between_places_is_that_of_kriging_errors(stations):
    """Dense algebra: C(x, y) of the errors of ordinary kriging from all stations."""
    points, values = stations
    c = SAME[0]
    kriging = Kriging(c, neighbours=None).fit(points, values[:, 0])
    where = np.random.default_rng(9).uniform(200.0, 800.0, (12, 2))
    drawn = Members(kriging, range(1, COUNT + 1)).predict(where)[:, 0]
    k, cross = c.matrix(points), c.matrix(points, where)
    ones = np.ones(len(points))
    whole = np.block([[k, ones[:, None]], [ones[None, :], np.zeros((1, 1))]])
    weights = np.linalg.solve(whole, np.vstack([cross, np.ones((1, len(where)))]))[:-1]
    expected = c.matrix(where) - weights.T @ cross - cross.T @ weights + weights.T @ k @ weights
    found = np.cov(drawn)
    spread = np.sqrt((np.outer(np.diag(expected), np.diag(expected)) + expected**2) / COUNT)
    assert np.abs((found - expected) / spread).max() < 4.5


def test_stations_without_noise_are_honoured_and_noise_is_respected(stations):
    points, values = stations
    noise = np.zeros((50, 2))
    noise[10:20] = 0.3
    kriging = Kriging(SAME).fit(points, np.nan_to_num(values), noise_variance=noise)
    members = Members(kriging, range(1, 601))
    exact = members.predict(points)
    np.testing.assert_allclose(exact[20:], np.nan_to_num(values)[20:, :, None] + np.zeros((1, 1, 600)), atol=1e-6)
    np.testing.assert_array_equal(exact, members.predict(points, small_scale=False))
    mean, variance = kriging.predict(points[10:20])
    # 600 members: a variance is known to sqrt(2 / 600) = 0.058; twenty of them on average to 0.013 and the method's error.
    assert (exact[10:20].var(axis=2) / variance).mean() == pytest.approx(1.0, abs=0.06)
    assert np.abs((exact[10:20].mean(axis=2) - mean) / np.sqrt(variance / 600)).max() < 4.5


def test_survey_offsets_are_simulated_and_removed(stations, places):
    structure = CovarianceSet([Covariance([Structure("exponential", 1.0, 400.0)], small_scale=0.1, survey=0.5)])
    survey = np.arange(50) % 4
    ratio = {}
    for neighbours in (None, 32):
        kriging = Kriging(structure, neighbours).fit(stations[0], stations[1][:, :1], survey=survey)
        mean, variance = kriging.predict(places)
        drawn = Members(kriging, range(1, COUNT + 1)).predict(places)
        z = (drawn.mean(axis=2) - mean) / drawn.std(axis=2) * np.sqrt(COUNT)
        assert np.abs(z).max() < 4.5
        ratio[neighbours] = float((drawn.var(axis=2) / variance).mean())
    # From all stations at once kriging knows its variance. Neighbourhoods get offsets that were estimated beforehand, and
    # say 0.8 to 1 times the variance that their predictions really have.
    assert ratio[None] == pytest.approx(1.0, abs=0.03)
    assert 0.97 < ratio[32] < 1.25


def test_a_member_is_the_same_whatever_is_asked_beside_it(stations, places):
    kriging = Kriging(OTHER).fit(*stations)
    together = Members(kriging, range(1, 41), seed=7).predict(places)
    alone = Members(kriging, [33], seed=7).predict(places[[50, 3]])
    np.testing.assert_array_equal(alone[:, :, 0], together[[50, 3], :, 32])


def test_nor_do_survey_offsets_hang_on_the_number_of_members(places):
    """Enough stations for a library's solution of many right-hand sides to differ in its last digits from one."""
    rng = np.random.default_rng(1)
    structure = CovarianceSet([Covariance([Structure("exponential", 1.0, 400.0)], small_scale=0.2, survey=0.3)])
    kriging = Kriging(structure).fit(
        rng.uniform(0, 1000, (300, 2)), rng.normal(size=300), survey=rng.integers(0, 4, 300)
    )
    together = Members(kriging, range(1, 6), frequencies=256).predict(places)
    np.testing.assert_array_equal(Members(kriging, [1], frequencies=256).predict(places)[:, :, 0], together[:, :, 0])
    for threads in (1, 2):  # nor on the threads of the library, or of compiled code
        before = numba.get_num_threads()
        numba.set_num_threads(min(threads, before))
        with threadpool_limits(limits=threads, user_api="blas"):
            again = Members(kriging, range(1, 6), frequencies=256).predict(places)
        numba.set_num_threads(before)
        np.testing.assert_array_equal(again, together)


def test_class_odds_agree_with_quadrature(stations, places):
    lr = LogRatio(("mud", "sand", "gravel"))
    kriging = Kriging(SAME).fit(*stations)
    drawn = Members(kriging, range(1, COUNT + 1), seed=3).predict(places[:30])
    mean, variance = kriging.predict(places[:30])
    sd = np.sqrt(variance)
    covariance = sd[:, :, None] * sd[:, None, :] * SAME.correlation
    odds = class_odds(lr, mean, covariance, trace=0.01)
    number = class_numbers(lr.inverse(np.moveaxis(drawn, 1, 2)), trace=0.01)
    share = (number == odds.number[:, None]).mean(axis=1)
    # 1,600 members know a share to 0.0125 and the quadrature to 0.011 at worst: 0.05 at the worst of 30 places.
    assert np.abs(share - odds.probability).max() < 0.05
    assert np.abs((share - odds.probability).mean()) < 0.01


def test_what_cannot_be_is_refused(stations, places):
    kriging = Kriging(SAME).fit(*stations)
    with pytest.raises(StructureError, match=r"members: found .* expected whole numbers from 1"):
        Members(kriging, [0, 1])
    with pytest.raises(StructureError, match="prior: give it both"):
        Members(kriging, [1]).predict(places, np.zeros((60, 2, 1)))
