"""Triangulation, tuned inverse distance, forests and averages."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.errors import StructureError
from texture.predict import Forest, ForestKriging, InverseDistance, Nearest, Triangulation, TunedInverseDistance
from texture.predict.average import Average, average_weights, mix


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=20, deadline=None)
def test_triangulation_gives_back_planes_inside(seed):
    rng = np.random.default_rng(seed)
    points, (a, b, c) = rng.uniform(0, 1000, (30, 2)), rng.normal(size=3)
    cells = points[:5].mean(axis=0)[None] + rng.uniform(-1, 1, (4, 2))
    method = Triangulation().fit(points, a + points @ [b, c])
    assert method.predict(cells)[0][:, 0] == pytest.approx(a + cells @ [b, c], rel=1e-7, abs=1e-7)
    assert method.outside_ == 0


def test_triangulation_outside_on_a_line_and_at_one_place():
    corners = [[0.0, 0.0], [1.0, 0.0], [0.0, 1.0], [0.0, 0.0]]
    outside = Triangulation().fit(corners, [1.0, 2.0, 3.0, 5.0])
    assert outside.predict([[0.0, 0.0], [9.0, 0.0]])[0][:, 0].tolist() == [
        3.0,
        2.0,
    ]  # two grabs at one place: their mean
    assert outside.outside_ == 1
    line = Triangulation().fit([[0.0, 0.0], [1.0, 1.0], [2.0, 2.0]], [1.0, 2.0, 3.0])
    assert line.predict([[1.9, 2.0]])[0][0, 0] == 3.0
    assert line.outside_ == 1
    with pytest.raises(StructureError, match="3 coordinates, expected 2; choose another method"):
        Triangulation().fit(np.zeros((4, 3)), np.zeros(4))


def test_tuning_finds_the_pair_that_leave_one_out_finds(meuse):
    tuned = TunedInverseDistance().fit(meuse.points, meuse.log_zinc)
    rows = np.arange(155)

    def square(power, count):
        method = InverseDistance(power, count)
        found = [
            method.fit(meuse.points[rows != i], meuse.log_zinc[rows != i]).predict(meuse.points[[i]])[0][0, 0]
            for i in rows
        ]
        return np.mean((np.array(found) - meuse.log_zinc) ** 2)

    ((power, count),) = tuned.chosen_
    best = square(power, count)
    for other in ((1.0, 8), (2.0, 16), (3.0, 12), (4.0, 32)):
        assert best <= square(*other) + 1e-12


def test_tuning_leaves_out_stations_at_the_same_place():
    rng = np.random.default_rng(2)
    points, z = rng.uniform(0, 100, (40, 2)), rng.normal(size=40)  # no structure: far neighbours are the best there is
    twice = TunedInverseDistance().fit(np.vstack([points, points]), np.concatenate([z, z]))
    # Were the twin left in, the steepest weights and the fewest neighbours would seem to be without error.
    assert twice.chosen_[0][0] < 4.0
    assert twice.chosen_[0][1] > 4
    assert TunedInverseDistance().fit([[0.0, 0.0]], [3.0]).predict([[5.0, 5.0]])[0].tolist() == [[3.0]]
    with pytest.raises(StructureError, match=r"powers \(\) and neighbours"):
        TunedInverseDistance(powers=())


@pytest.fixture(scope="module")
def steps():
    """A step in x, another in a covariate, and noise of standard deviation 0.3."""
    rng = np.random.default_rng(3)
    points, cover = rng.uniform(0, 1000, (400, 2)), rng.uniform(0, 1, 400)
    z = np.where(points[:, 0] < 500, 0.0, 2.0) + np.where(cover < 0.5, 0.0, 4.0)
    return points, cover, z, z + 0.3 * rng.standard_normal(400)


def test_forest_learns_from_covariates_and_knows_its_spread(steps):
    points, cover, truth, z = steps
    at = np.array([[250.0, 500.0], [750.0, 500.0]])
    forest = Forest(trees=100).fit(points, z, drift=cover)
    mean, variance = forest.predict(at, drift=[0.2, 0.8])
    assert mean[:, 0] == pytest.approx([0.0, 6.0], abs=0.2)
    assert variance[:, 0] == pytest.approx([0.09, 0.09], abs=0.07)
    low, high = forest.quantiles(at, [0.05, 0.95], drift=[0.2, 0.8])[..., 0]
    assert low == pytest.approx(mean[:, 0] - 0.5, abs=0.35)
    assert high == pytest.approx(mean[:, 0] + 0.5, abs=0.35)
    blind = Forest(trees=100).fit(points, z).out_of_bag_[:, 0]
    assert np.abs(forest.out_of_bag_[:, 0] - truth).mean() < 0.3 * np.abs(blind - truth).mean()


def test_forest_variance_and_quantiles_are_of_one_distribution(steps):
    points, _, _, z = steps
    forest = Forest(trees=30).fit(points[:80], z[:80])
    mean, variance = forest.predict(points[80:84])
    levels = np.linspace(0.0005, 0.9995, 1000)
    draws = forest.quantiles(points[80:84], levels)[..., 0]
    assert draws.mean(axis=0) == pytest.approx(mean[:, 0], abs=0.01)
    assert draws.var(axis=0) == pytest.approx(variance[:, 0], rel=0.02)


def test_out_of_bag_says_what_new_stations_would(steps):
    points, _, _, z = steps
    forest = Forest().fit(points[:250], z[:250])
    inside = np.sqrt(np.mean((forest.out_of_bag_[:, 0] - z[:250]) ** 2))
    outside = np.sqrt(np.mean((forest.predict(points[250:])[0][:, 0] - z[250:]) ** 2))
    fitted = np.sqrt(np.mean((forest.predict(points[:250])[0][:, 0] - z[:250]) ** 2))
    assert inside == pytest.approx(outside, rel=0.1)
    assert fitted < 0.9 * inside


def test_forest_is_the_same_again_and_refuses_nonsense(steps):
    points, _, _, z = steps
    one, two = (Forest(trees=20).fit(points, z).predict(points[:9]) for _ in range(2))
    np.testing.assert_array_equal(one[0], two[0])
    with pytest.raises(StructureError, match="found 0 trees and 5 in a leaf"):
        Forest(trees=0)
    with pytest.raises(StructureError, match="forest: call fit before predict"):
        Forest().predict([[0.0, 0.0]])


def test_kriging_of_residuals_betters_the_forest():
    rng = np.random.default_rng(4)
    points = rng.uniform(0, 1000, (300, 2))
    z = np.sin(points[:, 0] / 60) + np.cos(points[:, 1] / 70)
    train, test = slice(0, 220), slice(220, 300)
    together = ForestKriging(trees=60).fit(points[train], z[train])
    mean, variance = together.predict(points[test])
    alone = Forest(trees=60).fit(points[train], z[train]).predict(points[test])[0]

    def rmse(p):
        return np.sqrt(np.mean((p[:, 0] - z[test]) ** 2))

    assert rmse(mean) < 0.7 * rmse(alone)
    assert (variance > 0).all()
    with pytest.raises(StructureError, match="call fit before predict"):
        ForestKriging().predict([[0.0, 0.0]])


def test_weights_by_hand():
    # Inverse mean squares 1, 1/2, 1/4 of the three best over their sum 7/4.
    assert average_weights([4.0, 1.0, np.nan, 2.0, 9.0]) == pytest.approx([1 / 7, 4 / 7, 0, 2 / 7, 0])
    assert average_weights([0.0, 1.0]).tolist() == [1.0, 0.0]
    with pytest.raises(StructureError, match="no method has a held-out error"):
        average_weights([np.nan])


def test_mixture_by_hand_and_average_of_methods():
    mean, variance = mix([np.zeros((1, 1)), np.full((1, 1), 4.0)], [np.ones((1, 1))] * 2, np.array([0.75, 0.25]))
    assert (mean[0, 0], variance[0, 0]) == (1.0, 1.0 + 0.75 * 1.0 + 0.25 * 9.0)
    with pytest.raises(StructureError, match=r"1 members and weights \[0.5\]"):
        Average([Nearest()], [0.5])
