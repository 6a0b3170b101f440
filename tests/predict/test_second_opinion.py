import numpy as np
import pytest

from texture.predict import Kriging
from texture.predict.second_opinion import second_opinion
from texture.structure import Covariance, Structure

RNG = np.random.default_rng(0)
POINTS, VALUES, CELLS = RNG.random((200, 2)) * 1000.0, RNG.normal(size=200), RNG.random((50, 2)) * 1000.0
C = Covariance([Structure("exponential", 1.0, 500.0)], small_scale=0.1)


@pytest.mark.parametrize("noise", [0.0, 0.4])
@pytest.mark.parametrize(("neighbours", "mode"), [(16, "tile"), (16, "nearest"), (None, "tile")])
def test_pykrige_agrees(neighbours, mode, noise):
    k = Kriging(Covariance(C.structures, 0.1, noise), neighbours, mode).fit(POINTS, VALUES)
    found = second_opinion(k, CELLS, seed=1)
    assert (found.places, found.solver, found.agrees) == (8, "PyKrige", True)
    assert max(found.mean_difference, found.variance_difference) < 1e-10
    assert found == second_opinion(k, CELLS, seed=1)


def test_pykrige_agrees_on_stations_and_with_drift():
    k = Kriging(C, 16, drift="local").fit(POINTS, VALUES, drift=POINTS[:, 0])
    found = second_opinion(k, POINTS, seed=1, drift=POINTS[:, 0])
    assert (found.solver, found.agrees) == ("PyKrige", True)


@pytest.mark.parametrize(
    ("kriging", "fit", "why"),
    [
        (Kriging(C, 16, mean=0.5), {}, "known mean"),
        (Kriging(C, 16), {"noise_variance": RNG.random(200)}, "noise differs between stations"),
        (Kriging(Covariance(C.structures, survey=0.5), 16), {"survey": RNG.integers(0, 4, 200)}, "survey offsets"),
        (Kriging(C, 16), {"drift": POINTS[:, 1]}, "global drift"),
    ],
)
def test_a_dense_solve_where_pykrige_cannot_express_it(kriging, fit, why):
    drift = CELLS[:, 1] if "drift" in fit else None
    found = second_opinion(kriging.fit(POINTS, VALUES, **fit), CELLS, seed=2, drift=drift)
    assert found.solver == f"dense solve ({why})"
    assert found.agrees
    assert max(found.mean_difference, found.variance_difference) < 1e-10


def test_four_dimensions():
    k = Kriging(C, 16).fit(RNG.random((100, 4)) * 500.0, VALUES[:100])
    assert second_opinion(k, RNG.random((9, 4)) * 500.0, seed=3).solver == "dense solve (4 dimensions)"


def test_a_wrong_kernel_is_found_out(monkeypatch):
    k = Kriging(C, 16).fit(POINTS, VALUES)
    right = k.predict

    def wrong(points, drift=None):
        mean, variance = right(points, drift)
        return mean + 1e-4, variance

    monkeypatch.setattr(k, "predict", wrong)
    found = second_opinion(k, CELLS, seed=1)
    assert not found.agrees
    assert found.mean_difference == pytest.approx(1e-4 / np.sqrt(1.1), rel=1e-6)
    assert "DISAGREES" in str(found)
