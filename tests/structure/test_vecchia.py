import numpy as np
import pytest
from scipy.spatial import cKDTree

from texture.structure import Covariance, Structure
from texture.structure import vecchia as module
from texture.structure.likelihood import DenseLikelihood, Family, Parameters
from texture.structure.vecchia import Vecchia, VecchiaLikelihood, arrange, coarse_to_fine, mixed_model


def stations(n, seed=0):
    rng = np.random.default_rng(seed)
    points = rng.random((n, 2)) * 1000.0
    drift = np.column_stack([np.ones(n), points[:, 0] / 1000.0])
    return points, rng.normal(size=n), rng.random(n) * 0.2, drift, rng.integers(0, 4, n)


@pytest.mark.parametrize("family", [Family("exponential"), Family("matern", 1.5), None])
def test_with_all_predecessors_it_is_the_dense_likelihood(family, monkeypatch):
    monkeypatch.setattr(module, "PREDECESSORS", 80)
    points, z, noise, drift, survey = stations(60)
    p = Parameters(300.0, 1.2, 0.3, 0.4)
    dense = DenseLikelihood(points, z, noise, drift, survey)(family, p)
    product = VecchiaLikelihood(points, z, noise, drift, survey, (), arrange(points))(family, p)
    assert product[0] == pytest.approx(dense[0], abs=1e-9)
    assert product[1] == pytest.approx(dense[1], abs=1e-5)


def test_with_few_predecessors_it_is_close():
    points, z, noise, drift, survey = stations(900, 1)
    c = Covariance([Structure("exponential", 1.0, 400.0)], small_scale=0.1)
    z = np.linalg.cholesky(c.matrix(points)) @ z + np.sqrt(noise) * z[::-1]
    for p in (Parameters(400.0, 1.0, 0.1, 0.1), Parameters(200.0, 0.7, 0.2, 0.2)):
        dense = DenseLikelihood(points, z, noise, drift, survey)(Family("exponential"), p)
        product = VecchiaLikelihood(points, z, noise, drift, survey, (), arrange(points))(Family("exponential"), p)
        assert product[0] == pytest.approx(dense[0], abs=1.5)


def test_a_sample_of_conditionals_stands_for_all(monkeypatch):
    points, z, noise, drift, _ = stations(3000, 2)
    p = Parameters(100.0, 1.0, 0.3)
    full = VecchiaLikelihood(points, z, noise, drift, None, (), arrange(points))(Family("exponential"), p, False)[0]
    monkeypatch.setattr(module, "FIRST", 200)
    monkeypatch.setattr(module, "SAMPLED", 800)
    sampled = VecchiaLikelihood(points, z, noise, drift, None, (), arrange(points))
    assert sampled.mean_weight == pytest.approx(3.0)
    # The sum of 2,800 terms of standard deviation 0.7 from 800 of them: 2800 / sqrt(800) * 0.7 = 70.
    assert sampled(Family("exponential"), p, False)[0] == pytest.approx(full, abs=210)


def test_order_covers_the_area_before_it_refines():
    points = np.random.default_rng(3).random((2000, 2))
    order = coarse_to_fine(points)
    assert np.array_equal(np.sort(order), np.arange(2000))
    # The first 85 (1 + 4 + 16 + 64 cells) leave no place of the area farther than a cell's diagonal from one of them.
    places = np.random.default_rng(4).random((1000, 2))
    reach = cKDTree(points[order[:85]]).query(places)[0].max()
    assert reach < np.sqrt(2.0) / 8.0
    assert np.array_equal(np.sort(coarse_to_fine(np.zeros((5, 2)))), np.arange(5))


def test_predecessors_are_the_nearest_before():
    points = np.random.default_rng(4).random((500, 3))
    order = coarse_to_fine(points)
    wanted = np.array([0, 1, 5, 40, 77, 300, 499])
    given = module._predecessors(points, order, wanted, 12)
    for position, own in zip(wanted, given, strict=True):
        before = order[:position]
        distance = np.linalg.norm(points[before] - points[order[position]], axis=1)
        expected = before[np.argsort(distance)[:12]]
        assert set(own[own >= 0]) == set(expected)


def test_mixed_model_is_generalised_least_squares(monkeypatch):
    points, z, noise, drift, survey = stations(80, 5)
    c = Covariance([Structure("exponential", 1.0, 300.0)], small_scale=0.2)
    indicator = np.eye(4)[survey]
    monkeypatch.setattr(module, "PREDECESSORS", 100)
    white = Vecchia(points, np.column_stack([drift, indicator, z]), arrange(points, all_stations=True))
    _, gram = white.whiten(c.packed, noise + c.small_scale, threads=2)
    assert np.array_equal(gram, white.whiten(c.packed, noise + c.small_scale)[1])
    coefficients, covariance, _ = mixed_model(gram, 2, 0.5)
    coefficients = coefficients[:, 0]
    k = c.matrix(points) + np.diag(noise) + 0.5 * (survey[:, None] == survey[None, :])
    inverse = np.linalg.inv(drift.T @ np.linalg.solve(k, drift))
    beta = inverse @ drift.T @ np.linalg.solve(k, z)
    assert coefficients[:2] == pytest.approx(beta, abs=1e-9)
    assert covariance[:2, :2] == pytest.approx(inverse, abs=1e-9)
    assert coefficients[2:] == pytest.approx(0.5 * indicator.T @ np.linalg.solve(k, z - drift @ beta), abs=1e-9)


@pytest.mark.slow
def test_large_sets_are_fitted_in_seconds_and_recovered():
    # A sum of 4,000 random waves with the exponential model's spectrum (a bivariate t with one degree of freedom).
    rng = np.random.default_rng(6)
    points = rng.random((20_000, 2)) * 100_000.0
    scale = 12_000.0 / np.log(20.0)
    waves = rng.normal(size=(4000, 2)) / np.sqrt(rng.chisquare(1, (4000, 1))) / scale
    phase = rng.random(4000) * 2.0 * np.pi
    z = np.zeros(20_000)
    for i in range(0, 4000, 200):
        z += np.cos(points @ waves[i : i + 200].T + phase[i : i + 200]).sum(axis=1)
    z = z * np.sqrt(2.0 / 4000) + rng.normal(size=20_000) * np.sqrt(0.3)
    fitted = Covariance.fit(points, z)
    assert fitted.structures[0].model == "exponential"
    # The area is eight ranges wide: the sill is known to some 15 %, the small-scale variation far better.
    assert fitted.small_scale == pytest.approx(0.3, rel=0.08)
    assert fitted.structures[0].sill / fitted.range_m == pytest.approx(1.0 / 12_000.0, rel=0.12)


@pytest.mark.parametrize("d", [1, 2, 3, 4])
def test_each_grid_adds_the_first_drawn_of_every_cell_that_is_empty(d):
    rng = np.random.default_rng(d)
    points = np.concatenate(
        [rng.random((200, d)), np.round(rng.random((100, d)) * 8.0) / 8.0, 1e-3 * rng.random((99, d))]
    )
    drawn = np.random.default_rng(5).permutation(399).tolist()
    low, extent = points.min(axis=0), np.ptp(points, axis=0).max()
    expected = []
    for level in range(15):
        cells = [tuple(c) for c in np.floor((points - low) / extent * 2.0**level)]
        taken = {cells[i] for i in expected}
        for i in drawn:
            if cells[i] not in taken:
                taken.add(cells[i])
                expected.append(i)
    expected += [i for i in drawn if i not in set(expected)]
    found = coarse_to_fine(points, 5)
    assert sorted(found.tolist()) == list(range(399))
    # Two stations still in one cell of the fifteenth grid come in an order that finer ones decide.
    same = len({tuple(c) for c in np.floor((points - low) / extent * 2.0**14)})
    assert found[:same].tolist() == expected[:same]


def test_columns_of_the_same_stations_are_arranged_once(monkeypatch):
    from texture.structure import Covariance, vecchia

    calls = []
    monkeypatch.setattr(vecchia, "arrange", lambda *a, **k: calls.append(1) or arrange(*a, **k))
    rng = np.random.default_rng(6)
    points, values = rng.random((520, 2)) * 1000.0, rng.normal(size=(520, 3))
    values[0, 2] = np.nan
    Covariance.fit(points, values)
    assert len(calls) == 2
