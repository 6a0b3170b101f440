"""Presence × share: its distribution against brute force, its limits, and what it refuses."""

import numpy as np
import pytest
from scipy.stats import norm

from texture.composition import LogRatio, classify, presence_expected
from texture.composition.presence_draws import Presence as Distribution
from texture.errors import CompositionError

PARTS = ("mud", "sand", "gravel")
LR = LogRatio(PARTS)


def test_presence_distribution_against_brute_force():
    mean, covariance = np.array([[0.3, -0.5]]), np.array([[[1.2, 0.2], [0.2, 0.6]]])
    probability, correlation = np.array([0.35]), np.array([[-0.4, 0.0]])
    rng = np.random.default_rng(8)
    # A hidden normal whose threshold is met with probability 0.35, correlated so that the 0/1 indicator has -0.4 with mud's logit.
    hidden = -0.4 * np.sqrt(0.35 * 0.65) / norm.pdf(norm.ppf(0.35))
    joint = np.array([[1.2, 0.2, hidden * np.sqrt(1.2)], [0.2, 0.6, 0.0], [hidden * np.sqrt(1.2), 0.0, 1.0]])
    draws = rng.multivariate_normal(np.zeros(3), joint, 400_000)
    x, there = LR.inverse(mean + draws[:, :2]), draws[:, 2] + norm.ppf(0.35) > 0
    assert np.corrcoef(draws[:, 0], there)[0, 1] == pytest.approx(-0.4, abs=0.005)
    x[~there, 1] += x[~there, 2]
    x[~there, 2] = 0.0
    ours = Distribution(LR)
    given = (mean, covariance, probability, correlation)
    np.testing.assert_allclose(ours.expected(*given)[0], x.mean(axis=0), atol=0.002)
    levels = [0.05, 0.5, 0.95]
    np.testing.assert_allclose(ours.quantiles(*given, levels)[:, 0], np.quantile(x, levels, axis=0), atol=0.015)
    codes = classify(x[:50_000], "folk", trace=0.01)
    _, probability_of_best = ours.odds(*given, trace=0.01)
    assert probability_of_best[0] == pytest.approx(np.unique(codes, return_counts=True)[1].max() / 50_000, abs=0.02)


def test_presence_without_correlation_is_the_product():
    rng = np.random.default_rng(9)
    mean, covariance = (
        rng.normal(0, 1.5, (50, 2)),
        np.einsum("n,ij->nij", rng.uniform(0.1, 2, 50), [[1, 0.3], [0.3, 0.8]]),
    )
    probability = rng.uniform(0, 1, 50)
    product = presence_expected(LR, LR.expected(mean, covariance), probability)
    ours = Distribution(LR).expected(mean, covariance, probability, np.zeros((50, 2)))
    np.testing.assert_allclose(ours, product, atol=5e-4)


def test_the_share_of_a_cell_lies_between_all_or_nothing_and_its_mean():
    given = (np.array([[0.0, 0.0]]), np.zeros((1, 2, 2)), [0.5], np.zeros((1, 2)))
    ours, levels = Distribution(LR), [0.05, 0.5, 0.95]
    nothing, half, whole = (ours.quantiles(*given, levels, between=[b])[:, 0, 2] for b in (0.0, 0.125, 0.25))
    np.testing.assert_allclose(nothing, 0.125, atol=1e-9)  # half of the cell has gravel, a quarter of it there
    np.testing.assert_allclose(whole[[0, 2]], [0.0, 0.25], atol=1e-9)
    # Variance 0.125 at p = 1/2: correlation sin(pi / 4), share of the cell with probability 0.05 below Phi(-1.645 r / sqrt(1 - r^2)).
    assert 0.0 < half[0] < 0.125 < half[2] < 0.25


def test_presence_refuses_what_it_cannot_do():
    with pytest.raises(CompositionError, match="not with 'ilr'"):
        Distribution(LogRatio(PARTS, "ilr"))
    with pytest.raises(CompositionError, match="part = 'rock'"):
        Distribution(LR, "rock")
    with pytest.raises(CompositionError, match=r"probabilities have shape \(2,\)"):
        Distribution(LR).expected([[0.0, 0.0]], [[[1.0, 0.0], [0.0, 1.0]]], [0.5, 0.5], [[0.0, 0.0]])
