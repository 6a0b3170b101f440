import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.composition import LogRatio
from texture.composition.draws import normal_draws
from texture.errors import CompositionError

PARTS = ["mud", "sand", "gravel"]
FOUR = ["clay", "silt", "sand", "gravel"]


def covariance(sd, rho):
    sd = np.asarray(sd, dtype=float)
    correlation = np.full((len(sd), len(sd)), float(rho))
    np.fill_diagonal(correlation, 1.0)
    return sd[:, None] * correlation * sd[None, :]


def dense(lr, mean, matrix, half_width=8.0, nodes=601):
    """Expected parts on a dense grid of two standard coordinates."""
    z = np.linspace(-half_width, half_width, nodes)
    w = np.exp(-z * z / 2)
    w /= w.sum()
    factor = np.linalg.cholesky(matrix)
    grid = np.stack(np.meshgrid(z, z, indexing="ij"), axis=-1)
    return np.einsum("i,j,ijk->k", w, w, lr.inverse(mean + grid @ factor.T))


# Pawlowsky-Glahn & Olea (2004); expected values from 80-point Gauss-Hermite quadrature.
@pytest.mark.parametrize(
    ("mean", "variance", "value", "plain"),
    [
        (0, 1, 0.5, 0.5),
        (1, 1, 0.69673467, 0.73105858),
        (2, 4, 0.77520025, 0.88079708),
        (-1.5, 0.5, 0.20386913, 0.18242552),
    ],
)
def test_the_mean_of_the_back_transform_is_not_the_back_transform_of_the_mean(mean, variance, value, plain):
    lr = LogRatio(["mud", "sand"])
    assert lr.expected([[mean]], [[variance]])[0, 0] == pytest.approx(value, abs=1e-6)
    assert lr.inverse([mean])[0] == pytest.approx(plain, abs=1e-8)


@given(st.floats(-30, 30), st.floats(0, 100))
@settings(max_examples=60)
def test_one_split_to_1e_5_at_any_variance(mean, variance):
    z = np.linspace(-10, 10, 20_001)
    w = np.exp(-z * z / 2)
    y = mean + np.sqrt(variance) * z
    truth = (w / (1 + np.exp(-y))).sum() / w.sum()
    assert LogRatio(["mud", "sand"]).expected([[mean]], [[variance]])[0, 0] == pytest.approx(truth, abs=1e-5)


@pytest.mark.parametrize("kind", ["tree", "ilr", "alr"])
@pytest.mark.parametrize("rho", [0.0, -0.6, 0.6, 0.95])
@pytest.mark.parametrize(
    ("mean", "sd"), [((0, -2), (1, 1)), ((3, -1), (0.1, 3)), ((-6, 2), (3, 0.3)), ((1, 1), (7, 10))]
)
def test_three_parts_against_a_dense_grid(kind, rho, mean, sd):
    lr = LogRatio(PARTS, kind)
    matrix = covariance(sd, rho)
    variance = matrix[None] if rho else np.square([sd], dtype=float)
    np.testing.assert_allclose(lr.expected([mean], variance)[0], dense(lr, mean, matrix), rtol=0, atol=1e-5)


def test_correlation_moves_the_expected_parts():
    lr = LogRatio(PARTS)
    gravel = [lr.expected([[0.0, -1.5]], covariance([2, 2], rho)[None])[0, 2] for rho in (-0.6, 0.0, 0.6)]
    assert gravel[0] > gravel[1] + 0.02 > gravel[2] + 0.04


@pytest.mark.parametrize("kind", ["tree", "ilr", "alr"])
@pytest.mark.parametrize("branches", [None, ["clay", ["silt", ["sand", "gravel"]]]])
def test_four_parts_against_draws(kind, branches):
    lr = LogRatio(FOUR, kind, tree=branches)
    mean, matrix = np.array([0.5, -1.0, 0.3]), covariance([1.5, 1.0, 2.0], 0.4)
    y = mean + normal_draws(3, 2**15) @ np.linalg.cholesky(matrix).T
    np.testing.assert_allclose(lr.expected([mean], matrix[None])[0], lr.inverse(y).mean(axis=0), rtol=0, atol=1e-4)


def test_six_parts_by_draws_against_other_draws():
    parts = list("abcdef")
    matrix = covariance([1.0, 1.5, 0.7, 1.2, 0.9], 0.3)
    y = np.random.default_rng(5).normal(size=(400_000, 5)) @ np.linalg.cholesky(matrix).T
    for kind in ("tree", "ilr"):
        lr = LogRatio(parts, kind)
        # 4096 scrambled Sobol draws: measured here as below 5e-4; the plain draws alone are good to 3e-4.
        np.testing.assert_allclose(
            lr.expected(np.zeros((1, 5)), matrix[None])[0], lr.inverse(y).mean(axis=0), rtol=0, atol=8e-4
        )


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=20, deadline=None)
def test_rows_sum_to_one_and_zero_variance_is_the_inverse(seed):
    rng = np.random.default_rng(seed)
    mean, sd = rng.uniform(-15, 15, (20, 2)), rng.uniform(0, 10, (20, 2))
    matrices = np.stack([covariance(s, r) for s, r in zip(sd, rng.uniform(-1, 1, 20), strict=True)])
    for kind in ("tree", "ilr", "alr", "shares"):
        lr = LogRatio(PARTS, kind)
        for spread in (sd**2, matrices):
            fractions = lr.expected(mean, spread)
            assert np.abs(fractions.sum(axis=1) - 1).max() < 1e-12
            assert (fractions >= 0).all()
        np.testing.assert_allclose(lr.expected(mean, np.zeros((20, 2))), lr.inverse(mean), atol=1e-12)


def test_a_coordinate_that_follows_from_the_other():
    lr = LogRatio(PARTS)
    z = np.linspace(-8, 8, 4001)
    w = np.exp(-z * z / 2) / np.exp(-z * z / 2).sum()
    truth = w @ lr.inverse(np.column_stack([1 + 2 * z, -1 + 3 * z]))
    np.testing.assert_allclose(lr.expected([[1.0, -1.0]], covariance([2, 3], 1.0)[None])[0], truth, atol=1e-5)


def test_shares_use_product_moments():
    lr = LogRatio(PARTS, "shares")
    # E[(1 - s) t] = (1 - 0.5) 0.4 - cov: exact for any distribution.
    np.testing.assert_allclose(
        lr.expected([[0.5, 0.4]], [[[0.04, 0.01], [0.01, 0.02]]]), [[0.5, 0.31, 0.19]], atol=1e-15
    )


def test_nan_rows_give_nan_rows_and_leave_the_others_alone():
    for kind in ("tree", "ilr", "shares"):
        lr = LogRatio(PARTS, kind)
        for spread in (np.ones((2, 2)), np.stack([covariance([1, 1], 0.5)] * 2)):
            fractions = lr.expected([[0.2, np.nan], [0.2, 0.5]], spread)
            assert np.isnan(fractions[0]).all()
            assert np.isfinite(fractions[1]).all()
        broken = np.stack([covariance([1, 1], 0.5)] * 2)
        broken[1, 0, 1] = np.nan
        assert np.isnan(lr.expected([[0.2, 0.1], [0.2, 0.5]], broken)[1]).all()


@pytest.mark.parametrize(
    ("mean", "variance", "message"),
    [
        ([[0.0, 0.0]], [[1.0, -1.0]], "variance -1, expected zero or more"),
        ([[0.0, 0.0]], [[[1.0, 2.0], [2.0, 1.0]]], "not positive semi-definite"),
        ([[0.0, np.inf]], [[1.0, 1.0]], "infinite"),
        ([[0.0]], [[1.0]], r"mean has shape \(1, 1\), expected \(n, 2\)"),
        ([[0.0, 0.0]], [[1.0]], "variance has shape"),
    ],
)
def test_moments_that_make_no_sense_are_refused(mean, variance, message):
    for kind in ("tree", "alr"):
        with pytest.raises(CompositionError, match=message):
            LogRatio(PARTS, kind).expected(mean, variance)
