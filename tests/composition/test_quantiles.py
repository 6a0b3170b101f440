import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import expit, ndtr, ndtri

from texture.composition import LogRatio
from texture.composition.draws import normal_draws
from texture.errors import CompositionError

PARTS = ["mud", "sand", "gravel"]
LEVELS = np.array([0.05, 0.5, 0.95])


def covariance(sd, rho):
    sd = np.asarray(sd, dtype=float)
    correlation = np.full((len(sd), len(sd)), float(rho))
    np.fill_diagonal(correlation, 1.0)
    return sd[:, None] * correlation * sd[None, :]


def product_cdf(w, mean, sd, rho):
    """P(logistic(a) logistic(b) <= w) on a very dense grid of a, exact in b."""
    z = np.linspace(-8, 8, 200_001)
    weight = np.exp(-z * z / 2)
    a = expit(mean[0] + sd[0] * z)
    above = a > w
    edge = np.log(w / np.where(above, a - w, 1.0))
    inner = ndtr((edge - mean[1] - rho * sd[1] * z) / (sd[1] * np.sqrt(1 - rho**2)))
    return (weight * np.where(above, inner, 1.0)).sum() / weight.sum()


def test_the_first_split_has_a_closed_form():
    got = LogRatio(PARTS).quantiles([[0.3, -1.0]], [[4.0, 1.0]], LEVELS)
    np.testing.assert_allclose(got[:, 0, 0], expit(0.3 + 2 * ndtri(LEVELS)), atol=1e-8)


@given(
    st.tuples(st.floats(-6, 6), st.floats(-6, 6)),
    st.tuples(st.floats(0.1, 6), st.floats(0.1, 6)),
    st.floats(-0.95, 0.95),
    st.sampled_from([0.05, 0.25, 0.5, 0.75, 0.95]),
)
@settings(max_examples=50, deadline=None)
def test_products_to_1e_4_by_their_distribution(mean, sd, rho, level):
    lr = LogRatio(PARTS)
    spread = covariance(sd, rho)[None] if rho else np.square([sd])
    _, sand, gravel = lr.quantiles([mean], spread, [level])[0, 0]
    # The wanted level is bracketed by the distribution 1e-4 to each side of the quantile.
    for value, sign in ((gravel, 1.0), (sand, -1.0)):
        args = ((-mean[0], sign * mean[1]), sd, -sign * rho)
        assert product_cdf(max(value - 1e-4, 1e-12), *args) <= level + 1e-7
        assert product_cdf(min(value + 1e-4, 1 - 1e-12), *args) >= level - 1e-7


def test_one_of_two_coordinates_certain():
    got = LogRatio(PARTS).quantiles([[0.0, -1.0]], [[0.0, 4.0]], LEVELS)
    np.testing.assert_allclose(got[:, 0, 2], 0.5 * expit(-1 + 2 * ndtri(LEVELS)), atol=1e-4)
    got = LogRatio(PARTS).quantiles([[0.0, -1.0]], [[4.0, 0.0]], LEVELS)
    np.testing.assert_allclose(got[:, 0, 2], expit(2 * ndtri(LEVELS)) * expit(-1.0), atol=1e-4)
    got = LogRatio(PARTS).quantiles([[0.0, -1.0]], [[0.0, 0.0]], LEVELS)
    np.testing.assert_allclose(got[:, 0], np.broadcast_to(LogRatio(PARTS).inverse([0.0, -1.0]), (3, 3)), atol=1e-6)


@pytest.mark.parametrize(
    ("parts", "kind", "branches"),
    [
        (["clay", "silt", "sand", "gravel"], "tree", None),
        (["clay", "silt", "sand", "gravel"], "tree", ["clay", ["silt", ["sand", "gravel"]]]),
        (["clay", "silt", "sand", "gravel"], "ilr", None),
        (["mud", "sand", "gravel"], "alr", None),
        (["mud", "sand", "gravel"], "shares", None),
    ],
)
def test_every_kind_against_brute_force(parts, kind, branches):
    lr = LogRatio(parts, kind, tree=branches)
    d = lr.n_coordinates
    mean = np.array([0.4, 0.3, -0.5])[:d]
    matrix = covariance(np.array([0.1, 0.1, 0.1] if kind == "shares" else [1.5, 1.0, 2.0])[:d], 0.4)
    y = mean + np.random.default_rng(6).normal(size=(200_000, d)) @ np.linalg.cholesky(matrix).T
    below = (lr.inverse(y) <= lr.quantiles([mean], matrix[None], LEVELS)).mean(axis=1)
    # Plain draws are good to 2.2e-3 (two standard errors); both together were measured to differ by at most 3.1e-3.
    # Shares are kept off 0 and 1, where clipping piles up probability and no quantile meets its level.
    np.testing.assert_allclose(below, np.broadcast_to(LEVELS[:, None], below.shape), rtol=0, atol=4e-3)


@pytest.mark.parametrize("rho", [0.0, 0.6, -0.6])
@pytest.mark.parametrize("share", [0.25, 0.75])
@pytest.mark.parametrize(("mean", "sd"), [((0, -2), (1, 1)), ((-2.8, 2.5), (2.2, 2.5)), ((3, -3), (0.5, 3))])
def test_quantiles_of_the_cell_mean(rho, share, mean, sd):
    lr = LogRatio(PARTS)
    matrix = covariance(sd, rho)
    got = lr.quantiles([mean], matrix[None], LEVELS, within=share * np.square(sd))[:, 0]
    between = mean + normal_draws(2, 2**14) @ np.linalg.cholesky(matrix * (1 - share)).T
    cell = lr.expected(between, np.broadcast_to(matrix * share, (2**14, 2, 2)).copy())
    # Largest error measured over means in [-4, 4], sd from 0.5 to 3: 4e-3 correlated, 1e-3 not (of which the draws
    # that it is held against are half).
    np.testing.assert_allclose(got, np.quantile(cell, LEVELS, axis=0), rtol=0, atol=5e-3 if rho else 2e-3)


def test_cell_means_of_a_chain_and_of_shares():
    lr = LogRatio(["clay", "silt", "sand", "gravel"], tree=["clay", ["silt", ["sand", "gravel"]]])
    mean, matrix = np.array([-1.0, 0.3, -0.5]), covariance([1.5, 1.0, 2.0], 0.4)
    got = lr.quantiles([mean], matrix[None], LEVELS, within=0.5 * np.diag(matrix))[:, 0]
    between = mean + normal_draws(3, 2**13) @ np.linalg.cholesky(matrix * 0.5).T
    cell = lr.expected(between, np.broadcast_to(matrix * 0.5, (2**13, 3, 3)).copy())
    np.testing.assert_allclose(got, np.quantile(cell, LEVELS, axis=0), rtol=0, atol=5e-3)
    shares = LogRatio(["mud", "sand"], "shares").quantiles([[0.5]], [[0.04]], [0.95], within=[0.03])
    assert shares[0, 0, 0] == pytest.approx(0.5 + 0.1 * ndtri(0.95), abs=1e-3)


def test_nothing_within_changes_nothing_and_everything_within_leaves_the_mean():
    lr = LogRatio(PARTS)
    mean, variance = [[0.5, -1.0]], [[2.0, 3.0]]
    plain = lr.quantiles(mean, variance, LEVELS)
    np.testing.assert_allclose(lr.quantiles(mean, variance, LEVELS, within=[0.0, 0.0]), plain, atol=1e-4)
    all_within = lr.quantiles(mean, variance, LEVELS, within=[[2.0, 3.0]])
    np.testing.assert_allclose(all_within, np.broadcast_to(lr.expected(mean, variance), (3, 1, 3)), atol=1e-4)


def test_nan_rows_give_nan_rows():
    for kind in ("tree", "ilr", "shares"):
        got = LogRatio(PARTS, kind).quantiles([[0.1, np.nan], [0.1, 0.2]], np.ones((2, 2)), LEVELS)
        assert np.isnan(got[:, 0]).all()
        assert np.isfinite(got[:, 1]).all()


def test_quantiles_rise_with_the_level():
    rng = np.random.default_rng(7)
    got = LogRatio(PARTS).quantiles(rng.normal(0, 3, (50, 2)), rng.uniform(0, 9, (50, 2)), [0.01, 0.2, 0.5, 0.8, 0.99])
    assert (np.diff(got, axis=0) >= -4e-5).all()


@pytest.mark.parametrize(
    ("kwargs", "message"),
    [
        ({"levels": [0.5, 1.0]}, "expected probabilities between 0 and 1"),
        ({"levels": [0.5], "within": [2.0, 0.1]}, "expected from zero to the variance"),
        ({"levels": [0.5], "within": [0.1]}, "within has shape"),
    ],
)
def test_settings_that_make_no_sense_are_refused(kwargs, message):
    with pytest.raises(CompositionError, match=message):
        LogRatio(PARTS).quantiles([[0.0, 0.0]], [[1.0, 1.0]], **kwargs)


def test_cell_means_need_a_tree():
    with pytest.raises(CompositionError, match="not with 'ilr'"):
        LogRatio(PARTS, "ilr").quantiles([[0.0, 0.0]], [[1.0, 1.0]], [0.5], within=[0.1, 0.1])


def test_levels_do_not_cross_where_there_is_next_to_no_spread():
    lr = LogRatio(["mud", "sand", "gravel"])
    # A cell beside a station, from a real map: each level is right to 1e-4, the spread between them is less.
    low, middle, high = lr.quantiles([[-3.41886928, -1.2017394]], [[5.89257e-03, 1.81458624e-06]], [0.05, 0.5, 0.95])
    assert (low <= middle).all()
    assert (middle <= high).all()


@pytest.mark.parametrize("variance", [0.0, 1e-14, 100.0, 1e4])
@pytest.mark.parametrize("rho", [0.0, 0.999999])
def test_extreme_moments_stay_finite_and_in_order(variance, rho):
    lr = LogRatio(PARTS)
    mean = np.array([[50.0, -50], [-50, 50], [-700, 700], [800, 800], [0, 0], [-30, -30]])
    spread = np.full((6, 2), variance)
    matrix = np.stack([covariance(np.sqrt(s), rho) for s in spread])
    for within in (None, 0.5 * spread):
        got = lr.quantiles(mean, matrix if rho else spread, [0.001, 0.5, 0.999], within=within)
        assert ((got >= 0) & (got <= 1)).all()
        assert (np.diff(got, axis=0) >= -1e-4).all()
    assert np.abs(lr.expected(mean, matrix).sum(axis=1) - 1).max() < 1e-12


@pytest.mark.parametrize("kind", ["tree", "ilr", "alr", "shares"])
def test_no_rows_give_no_rows(kind):
    lr, none = LogRatio(PARTS, kind), np.empty((0, 2))
    assert lr.forward(np.empty((0, 3))).shape == (0, 2)
    assert lr.inverse(none).shape == (0, 3)
    assert lr.expected(none, none).shape == lr.expected(none, np.empty((0, 2, 2))).shape == (0, 3)
    assert lr.quantiles(none, none, LEVELS).shape == (3, 0, 3)
