"""Survey offsets are taken out of the map, and intervals hold what they promise."""

import numpy as np
import pytest

from texture.predict import Kriging
from texture.predict.effects import arrange_stations, estimate_effects
from texture.structure import Covariance, Structure

BED = Covariance([Structure("exponential", 1.0, 600.0)], small_scale=0.02, survey=0.5)


def patchwork(n, seed, side=4):
    """A field sampled by sixteen surveys, each with its own patch of the area and its own offset."""
    rng = np.random.default_rng(seed)
    points = rng.random((n, 2)) * 1000.0
    bed = np.linalg.cholesky(BED.matrix(points)) @ rng.normal(size=n)
    patch = np.floor(points / 1000.0 * side).astype(int) @ [1, side]
    offset = rng.normal(size=side**2) * np.sqrt(BED.survey)
    return points, bed, patch, offset - offset.mean()


def test_a_patchwork_does_not_show():
    points, bed, patch, offset = patchwork(1600, 1)
    blind = Kriging(Covariance(BED.structures, BED.small_scale), 32).fit(points, bed + offset[patch])
    told = Kriging(BED, 32).fit(points, bed + offset[patch], survey=patch)
    # Pairs of cells ten metres to either side of the patches' edges, where the offsets jump.
    y = np.linspace(20.0, 980.0, 300)
    jumps = {}
    for name, k in (("blind", blind), ("told", told)):
        left, right = (k.predict(np.column_stack([np.full(300, x), y]))[0][:, 0] for x in (490.0, 510.0))
        jumps[name] = right - left
    true = np.concatenate([[offset[p + 1] - offset[p]] * 75 for p in (1, 5, 9, 13)])
    slope = {name: float(jump @ true / (true @ true)) for name, jump in jumps.items()}
    assert slope["blind"] > 0.3
    assert abs(slope["told"]) < 0.06


def test_all_stations_and_tiles_agree_on_the_offsets():
    points, bed, patch, offset = patchwork(800, 2)
    z = bed + offset[patch]
    cells = np.random.default_rng(3).random((200, 2)) * 1000.0
    wide, variance = Kriging(BED, None).fit(points, z, survey=patch).predict(cells)
    local, local_variance = Kriging(BED, 32).fit(points, z, survey=patch).predict(cells)
    assert np.sqrt(np.mean((local - wide) ** 2 / variance)) < 0.35
    # What the local answer leaves out is how the offsets' errors hang together; it must not promise more for it.
    assert 0.8 < np.mean(local_variance / variance) < 1.3


def test_effects_dense_and_by_vecchia_agree(monkeypatch):
    points, bed, patch, offset = patchwork(700, 4)
    noise, drift = np.full(700, 0.05), (points[:, :1] - 500.0) / 289.0
    dense = estimate_effects(points, (bed + offset[patch])[:, None], noise, patch, BED, drift, arrange_stations(points))
    monkeypatch.setattr("texture.predict.effects.MOST_DENSE", 100)
    product = estimate_effects(
        points, (bed + offset[patch])[:, None], noise, patch, BED, drift, arrange_stations(points)
    )
    assert product.offsets == pytest.approx(dense.offsets, abs=0.1)
    assert product.coefficients == pytest.approx(dense.coefficients, abs=0.1 * np.sqrt(dense.covariance[0, 0]) + 0.05)
    assert product.offset_variance == pytest.approx(dense.offset_variance, rel=0.1)


def test_surveys_that_mix_are_told_apart_well():
    points, bed, _, _ = patchwork(700, 5)
    rng = np.random.default_rng(6)
    survey = rng.integers(0, 5, 700)
    offset = np.array([-1.0, 0.5, 0.0, 0.7, -0.2])
    z = (bed + offset[survey])[:, None]
    found = estimate_effects(points, z, np.full(700, 1e-9), survey, BED, np.empty((700, 0)), None)
    assert found.offsets[0] - found.offsets.mean() == pytest.approx(offset - offset.mean(), abs=0.1)


@pytest.mark.parametrize("neighbours", [32, None])
def test_nominal_ninety_percent_intervals_cover(neighbours):
    # Over simulated fields with the true covariance: 87 to 93 % of new samples inside.
    inside = []
    for seed in range(12):
        rng = np.random.default_rng(100 + seed)
        points = rng.random((500, 2)) * 1000.0
        noise = rng.choice([0.05, 0.4], 500)
        z = np.linalg.cholesky(BED.matrix(points)) @ rng.normal(size=500) + np.sqrt(noise) * rng.normal(size=500)
        c = Covariance(BED.structures, BED.small_scale)
        k = Kriging(c, neighbours).fit(points[:400], z[:400], noise_variance=noise[:400])
        mean = k.predict(points[400:])[0][:, 0]
        spread = np.sqrt(k.sample_variance(points[400:], noise_variance=noise[400:])[:, 0])
        inside.append(np.abs(z[400:] - mean) < 1.6449 * spread)
    assert 0.87 < np.mean(inside) < 0.93
