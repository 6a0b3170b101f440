import mpmath
import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from scipy.special import ndtr

from texture.composition import LogRatio
from texture.composition.censoring import censored_site, censoring_bounds, truncated_moments
from texture.composition.presence import presence_expected, presence_forward
from texture.errors import CompositionError

NAN = float("nan")
LR = LogRatio(["mud", "sand", "gravel"], detection_limit=0.01)


def test_bounds_of_zeros_by_hand():
    low, high = censoring_bounds(LR, [[0.5, 0.5, 0.0], [0.0, 0.6, 0.4], [1, 0, 0], [0.3, NAN, NAN], [0.5, 0, 0.5]])
    np.testing.assert_allclose(high[0], [0.0, np.log(0.01 / 0.49)])
    np.testing.assert_allclose(low[0], [0.0, -np.inf])
    np.testing.assert_allclose(high[1], [np.log(0.01 / 0.99), np.log(0.4 / 0.6)])
    np.testing.assert_allclose(low[2], [np.log(0.99 / 0.01), NAN])
    np.testing.assert_allclose(high[2], [np.inf, NAN])
    np.testing.assert_allclose(low[3], [np.log(0.3 / 0.7), NAN])
    np.testing.assert_allclose([low[4, 1], high[4, 1]], [np.log(0.49 / 0.01), np.inf])


def test_truncated_moments_of_the_half_normal():
    # Half of a standard normal: mean sqrt(2 / pi), variance 1 - 2 / pi (common knowledge of statistics).
    mean, variance = truncated_moments([0.0], [1.0], [0.0], [np.inf])
    assert mean[0] == pytest.approx(np.sqrt(2 / np.pi))
    assert variance[0] == pytest.approx(1 - 2 / np.pi)


@given(st.floats(-5, 5), st.floats(0.1, 9), st.floats(-40, 3))
@example(4.0, 0.1015625, -28.0)  # a hundred standard deviations out
@settings(max_examples=40, deadline=None)
def test_truncated_moments_agree_with_sixty_digits(mean, variance, bound):
    # Not with scipy's truncnorm, whose variance is 1.5e-5 off a hundred standard deviations out.
    with mpmath.workdps(60):
        sd = mpmath.sqrt(mpmath.mpf(variance))
        for low, high, side in ((-np.inf, bound, 1), (-bound, np.inf, -1)):
            z = side * ((bound if side == 1 else -bound) - mpmath.mpf(mean)) / sd
            ratio = mpmath.npdf(z) / mpmath.ncdf(z)
            ours = truncated_moments([mean], [variance], [low], [high])
            np.testing.assert_allclose(ours[0], float(mean - side * sd * ratio), rtol=1e-7, atol=1e-7)
            np.testing.assert_allclose(ours[1], float(variance * (1 - z * ratio - ratio**2)), rtol=1e-6)


@given(st.floats(-5, 5), st.floats(0.1, 9), st.floats(-6, 3))
@settings(max_examples=40)
def test_a_site_and_the_prediction_make_the_truncated_normal(mean, variance, bound):
    value, noise = censored_site([mean], [variance], [-np.inf], [bound])
    z = (bound - mean) / np.sqrt(variance)
    if np.isnan(value[0]):
        assert ndtr(z) > 0.95  # the bound cuts off next to nothing
        return
    combined = 1 / (1 / noise[0] + 1 / variance)
    new_mean, new_variance = truncated_moments([mean], [variance], [-np.inf], [bound])
    assert combined == pytest.approx(new_variance[0], rel=1e-6)
    assert combined * (value[0] / noise[0] + mean / variance) == pytest.approx(new_mean[0], abs=1e-6)
    assert new_mean[0] < min(bound, mean) + 1e-9


def test_censoring_recovers_a_mean_that_replacement_misses():
    # Independent values, known spread: a zero stands for anything below the limit, and sweeps of expectation propagation on
    # one common mean find it again; replacement at 0.65 of the limit stays biased.
    rng = np.random.default_rng(11)
    truth, spread = -5.0, 1.5
    y = truth + spread * rng.normal(size=4000)
    gravel = 0.5 / (1 + np.exp(-y))
    fractions = np.column_stack([np.full(4000, 0.5), 0.5 - gravel, np.where(gravel < 0.01, 0.0, gravel)])
    fractions[:, 1] = 1 - fractions[:, 0] - fractions[:, 2]
    coords = LR.forward(fractions)[:, 1]
    low, high = (b[:, 1] for b in censoring_bounds(LR, fractions))
    zero = low < high
    assert 0.6 < zero.mean() < 0.9
    estimate = coords.mean()
    replaced = estimate
    for _ in range(60):  # the common mean is the neighbours' prediction, known far better than one value
        filled = coords.copy()
        filled[zero] = truncated_moments(estimate, spread**2, low[zero], high[zero])[0]
        estimate = filled.mean()
    assert estimate == pytest.approx(truth, abs=0.1)
    assert abs(replaced - truth) > 0.3


def test_censoring_refuses_what_it_cannot_do():
    with pytest.raises(CompositionError, match="not with 'ilr'"):
        censoring_bounds(LogRatio(["a", "b"], "ilr"), [[0.5, 0.5]])
    with pytest.raises(CompositionError, match="censors nothing"):
        censoring_bounds(LogRatio(["a", "b"], detection_limit=0.0), [[0.5, 0.5]])
    with pytest.raises(CompositionError, match="one bound finite, one infinite"):
        truncated_moments([0.0], [1.0], [0.0], [1.0])


def test_presence_by_hand():
    coords, present = presence_forward(LR, [[0.5, 0.4, 0.1], [0.5, 0.5, 0.0], [1, 0, 0], [0.3, NAN, NAN]])
    np.testing.assert_allclose(present, [1, 0, NAN, NAN])
    np.testing.assert_allclose(coords[:, 1], [np.log(0.25), NAN, NAN, NAN])
    np.testing.assert_allclose(coords[[0, 1, 3], 0], [0, 0, np.log(0.3 / 0.7)])
    np.testing.assert_allclose(
        presence_expected(LR, [[0.2, 0.5, 0.3], [0.2, 0.5, 0.3], [0.2, 0, 0.8]], [0.5, -0.1, 0.25]),
        [[0.2, 0.65, 0.15], [0.2, 0.8, 0.0], [0.2, 0.6, 0.2]],
    )


def test_presence_keeps_the_mean_where_the_part_is_in_patches():
    # Probability x share of a population with 70 % true zeros has its mean; log-ratio replacement has not.
    rng = np.random.default_rng(12)
    share = 1 / (1 + np.exp(-rng.normal(-0.5, 0.8, 20_000)))
    share[rng.random(20_000) < 0.7] = 0.0
    fractions = np.column_stack([np.full(20_000, 0.4), 0.6 * (1 - share), 0.6 * share])
    coords, present = presence_forward(LR, fractions)
    there = np.nanmean(coords, axis=0)
    given_presence = LR.expected([there], [np.nanvar(coords, axis=0)])
    gravel = presence_expected(LR, given_presence, [np.nanmean(present)])[0, 2]
    assert gravel == pytest.approx(fractions[:, 2].mean(), rel=0.02)
    plain = LR.forward(fractions)
    replaced = LR.expected([plain.mean(axis=0)], [plain.var(axis=0)])[0, 2]
    assert abs(replaced - fractions[:, 2].mean()) > 0.05 * fractions[:, 2].mean()


def test_presence_of_a_part_in_a_larger_tree():
    lr = LogRatio(["clay", "silt", "sand", "gravel"], tree=["gravel", ["sand", ["clay", "silt"]]])
    out = presence_expected(lr, [[0.1, 0.2, 0.3, 0.4]], [0.5])
    np.testing.assert_allclose(out, [[0.1 + 0.2 / 6, 0.2 + 0.2 / 3, 0.3 + 0.1, 0.2]])


def test_presence_refuses_what_it_cannot_do():
    with pytest.raises(CompositionError, match="part = 'rock'"):
        presence_forward(LR, [[0.5, 0.5, 0.0]], "rock")
    with pytest.raises(CompositionError, match="not with 'shares'"):
        presence_forward(LogRatio(["a", "b"], "shares"), [[0.5, 0.5]], "a")
    with pytest.raises(CompositionError, match=r"probabilities \(2,\)"):
        presence_expected(LR, [[0.5, 0.5, 0.0]], [0.1, 0.2])
