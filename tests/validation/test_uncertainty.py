"""Scores of distributions, calibration and the spread of methods that have none."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import norm

from texture.composition import LogRatio
from texture.structure import Covariance, CovarianceSet, Structure
from texture.treatments import Presence, Replace, Shares
from texture.validation.calibration import calibration_factor, calibration_factors, out_of_fold_factors
from texture.validation.ensemble import pit_share_below, score_draws
from texture.validation.resampling import block_weights, map_weights
from texture.validation.spread import out_of_fold_spread, residual_spread


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=20, deadline=None)
def test_draw_scores_equal_brute_force(seed):
    # Gneiting & Raftery (2007), eqs. 21 and 22, over all pairs of draws.
    rng = np.random.default_rng(seed)
    draws, observed = rng.dirichlet([1, 2, 0.5], (5, 40)), rng.dirichlet([1, 2, 0.5], 5)
    found = score_draws(draws, observed, 0.0)
    for x, y, crps, energy in zip(draws, observed, found.crps, found.energy, strict=True):
        pairs = np.abs(x[:, None] - x[None])
        assert crps == pytest.approx(np.abs(x - y).mean(axis=0) - 0.5 * pairs.mean(axis=(0, 1)), abs=1e-12)
        between = np.linalg.norm(x[:, None] - x[None], axis=-1).mean()
        assert energy == pytest.approx(np.linalg.norm(x - y, axis=1).mean() - 0.5 * between, abs=1e-12)


def test_crps_of_a_normal():
    # Closed form of the normal's CRPS at its mean: sd × (2 φ(0) − 1/√π) (Gneiting & Raftery 2007, eq. 5).
    x = norm.ppf((np.arange(4000) + 0.5) / 4000)[None, :, None]
    found = score_draws(x, np.zeros((1, 1))).crps[0, 0]
    assert found == pytest.approx(2 * norm.pdf(0) - 1 / np.sqrt(np.pi), abs=1e-4)


def test_what_is_below_the_limit_is_anywhere_below_it():
    draws = np.linspace(0.005, 0.995, 100)[None, :, None]
    low = score_draws(draws, np.array([[0.0]]), limit=0.2)
    assert (low.pit_low[0, 0], low.pit_high[0, 0]) == (0.0, 0.2)
    assert pit_share_below(low.pit_low, low.pit_high, 0.05)[0, 0] == pytest.approx(0.25)
    high = score_draws(draws, np.array([[0.5]]), limit=0.2)
    assert (high.pit_low[0, 0], high.pit_high[0, 0]) == (0.5, 0.5)


def test_unknown_parts_are_not_scored():
    found = score_draws(np.random.default_rng(0).dirichlet([1, 1, 1], (1, 9)), np.array([[0.2, np.nan, np.nan]]))
    assert np.isfinite(found.crps[0]).tolist() == [True, False, False]
    assert np.isnan(found.energy[0])


@pytest.mark.parametrize("make", [Replace, Shares, Presence])
def test_samples_follow_expected_fractions_and_quantiles(make):
    kind = "shares" if make is Shares else "tree"
    treatment = make(LogRatio(("mud", "sand", "gravel"), kind, detection_limit=0.005))
    mean = np.array([[0.4, 0.3, 0.6]]) if make is Presence else np.array([[0.4, 0.3]])
    k = mean.shape[1]
    covariance = 0.01 * (0.3 + 0.7 * np.eye(k))[None]
    normals = np.random.default_rng(1).standard_normal((40_000, k))
    samples = treatment.samples(mean, covariance, normals)[0]
    assert samples.sum(axis=1) == pytest.approx(np.ones(len(samples)))
    assert samples.mean(axis=0) == pytest.approx(treatment.expected(mean, covariance)[0], abs=0.004)
    low, high = treatment.sample_quantiles(mean, covariance, (0.05, 0.95))[:, 0]
    assert np.quantile(samples, [0.05, 0.95], axis=0) == pytest.approx(np.stack([low, high]), abs=0.01)


def test_factor_of_exact_values_is_the_mean_square():
    rng = np.random.default_rng(3)
    z = 1.7 * rng.standard_normal(400)
    assert calibration_factor(np.zeros(400), np.ones(400), z, z) == pytest.approx((z**2).mean(), abs=1e-4)


def test_factor_is_found_again_where_small_values_are_only_known_to_be_small():
    # A normal of variance 2 taken for one of variance 1, everything below -1 known as no more than that.
    rng = np.random.default_rng(4)
    y = np.sqrt(2.0) * rng.standard_normal(6000)
    low, high = np.where(y < -1, -np.inf, y), np.maximum(y, -1.0)
    assert calibration_factor(np.zeros(6000), np.ones(6000), low, high) == pytest.approx(2.0, abs=0.12)
    # Taken as values, they would say something else.
    assert abs((high**2).mean() - 2.0) > 0.3
    flipped = calibration_factor(np.zeros(6000), np.ones(6000), -high, -low)
    assert flipped == calibration_factor(np.zeros(6000), np.ones(6000), low, high)


def test_factors_of_a_fold_do_not_see_the_fold():
    rng = np.random.default_rng(5)
    y = rng.standard_normal((90, 2))
    labels = np.repeat([0, 1, 2], 30)
    wild = y.copy()
    wild[labels == 2] *= 10
    quiet, loud = (out_of_fold_factors(np.zeros((90, 2)), np.ones((90, 2)), v, v, labels) for v in (y, wild))
    np.testing.assert_array_equal(quiet[labels == 2], loud[labels == 2])
    assert (loud[labels == 0] > quiet[labels == 0]).all()


def test_few_errors_and_exact_predictions_leave_the_factor_at_one():
    few = np.arange(5.0)
    assert calibration_factor(np.zeros(5), np.ones(5), few, few) == 1.0
    many = np.arange(50.0)
    assert calibration_factor(many, np.zeros(50), many, many) == 1.0
    nan = np.full((50, 1), np.nan)
    assert calibration_factors(nan, nan, nan, nan).tolist() == [1.0]


def test_scaled_covariance_keeps_predictions_and_multiplies_variances():
    from texture.predict import Kriging

    rng = np.random.default_rng(6)
    points, z, cells = rng.uniform(0, 1000, (60, 2)), rng.standard_normal(60), rng.uniform(0, 1000, (20, 2))
    noise, survey = rng.uniform(0, 0.2, 60), rng.integers(0, 3, 60)
    plain = CovarianceSet([Covariance([Structure("exponential", 1.0, 300.0)], small_scale=0.2, noise=0.1, survey=0.1)])
    mean, variance = Kriging(plain).fit(points, z, noise, survey).predict(cells)
    again, wider = Kriging(plain.scaled([2.5])).fit(points, z, 2.5 * noise, survey).predict(cells)
    np.testing.assert_allclose(again, mean, atol=1e-12)
    np.testing.assert_allclose(wider, 2.5 * variance, rtol=1e-12)


def test_spread_is_the_mean_square_and_correlation_of_errors():
    rng = np.random.default_rng(7)
    errors = rng.multivariate_normal([0, 0], [[2.0, 0.6], [0.6, 1.0]], 4000)
    variance, correlation = residual_spread(errors)
    assert variance == pytest.approx((errors**2).mean(axis=0))
    assert correlation[0, 1] == pytest.approx(0.6 / np.sqrt(2.0), abs=0.05)
    errors[::2, 1] = np.nan
    assert residual_spread(errors)[1][0, 1] == pytest.approx(0.6 / np.sqrt(2.0), abs=0.07)
    assert residual_spread(errors[:10])[1][0, 1] == 0.0  # too few pairs
    assert residual_spread(np.full((9, 2), np.nan))[0].tolist() == [0.0, 0.0]
    labels = np.arange(4000) % 2
    each = out_of_fold_spread(errors, labels)[0]
    assert each[0] == pytest.approx(np.nanmean(errors[labels == 1] ** 2, axis=0))


def test_blocks_are_drawn_whole():
    rng = np.random.default_rng(8)
    points = rng.uniform(0, 100, (80, 2))
    weights = block_weights(points, 25.0, 1)
    block = np.floor((points - points.min(axis=0)) / 25.0) @ [10, 1]
    for b in np.unique(block):
        assert (np.ptp(weights[:, block == b], axis=1) == 0).all()
    assert weights.mean() == pytest.approx(1.0, abs=0.05)
    assert block_weights(points, 1000.0, 1).shape == (0, 80)


def test_map_weights_are_the_shares_of_the_map():
    # Two stations split a square at x = 3; a repeat at the first shares its half.
    x, y = np.meshgrid(np.arange(0.5, 10), np.arange(0.5, 10))
    points = np.array([[1.0, 5.0], [5.0, 5.0], [1.0, 5.0]])
    assert map_weights(points, np.column_stack([x.ravel(), y.ravel()])) == pytest.approx([0.15, 0.7, 0.15])
