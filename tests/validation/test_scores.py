"""Scores against scikit-learn, scipy or a hand computation."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sklearn.metrics import cohen_kappa_score, confusion_matrix, mean_absolute_error, r2_score, root_mean_squared_error

from texture.composition import classify
from texture.validation.agreement import class_agreement
from texture.validation.ensemble import DrawScores
from texture.validation.held_out import HeldOut, ScoreWeights, score_table
from texture.validation.reach import beyond_reach, validated_reach_m
from texture.validation.scores import (
    aitchison_distance,
    concordance,
    inside_interval,
    interval_score,
    part_scores,
    pit_histogram,
    r_squared,
    weighted_mean,
)

NAN = np.full(50, np.nan)
NONE = {0.5: (NAN, NAN), 0.9: (NAN, NAN)}


@given(st.integers(0, 2**32 - 1))
def test_scores_equal_scikit_learn_under_any_weights(seed):
    rng = np.random.default_rng(seed)
    observed, predicted, other = rng.uniform(0, 1, (3, 50))
    weights = np.stack([np.ones(50), rng.uniform(0.1, 1, 50)])
    scores = part_scores(observed, predicted, weights, NONE, NAN, (NAN, NAN), controls={"nearest": other})
    for row, w in enumerate(weights):
        for name, reference in (("r_squared", r2_score), ("rmse", root_mean_squared_error)):
            assert scores[name][row] == pytest.approx(reference(observed, predicted, sample_weight=w), abs=1e-12)
        expected = mean_absolute_error(observed, predicted, sample_weight=w)
        assert scores["mean_absolute_error"][row] == pytest.approx(expected, abs=1e-12)
        ratio = root_mean_squared_error(observed, predicted, sample_weight=w) ** 2
        ratio /= root_mean_squared_error(observed, other, sample_weight=w) ** 2
        assert scores["skill_over_nearest"][row] == pytest.approx(1 - ratio, abs=1e-12)
    assert scores["mean_error"][0] == pytest.approx((predicted - observed).mean(), abs=1e-12)
    assert np.isnan(scores["coverage_90"]).all()


@given(st.integers(0, 2**32 - 1))
def test_whole_weights_are_repeated_rows(seed):
    rng = np.random.default_rng(seed)
    observed, predicted = rng.uniform(0, 1, (2, 50))
    times = rng.integers(0, 4, 50)
    repeated = [np.repeat(v, times) for v in (observed, predicted)]
    for score in (r_squared, concordance):
        assert score(observed, predicted, times[None].astype(float))[0] == pytest.approx(score(*repeated)[0], abs=1e-12)


def test_concordance_by_hand():
    # Lin (1989): 2 s_xy / (s_x² + s_y² + (mean difference)²) with population variances.
    observed, predicted = np.array([1.0, 2.0, 3.0, 4.0]), np.array([1.5, 2.0, 2.5, 4.0])
    s_xy = ((observed - 2.5) * (predicted - 2.5)).mean()
    assert concordance(observed, predicted)[0] == pytest.approx(2 * s_xy / (1.25 + predicted.var()))
    assert concordance(observed, observed)[0] == pytest.approx(1.0)


def test_unknown_rows_are_left_out_and_constant_rows_do_not_divide_by_zero():
    nan = np.full(3, np.nan)
    rest = np.ones((2, 3)), {0.5: (nan, nan), 0.9: (nan, nan)}, nan, (nan, nan)
    scores = part_scores(np.array([0.2, np.nan, 0.2]), np.array([0.2, 0.9, 0.2]), *rest)
    assert scores["n"].tolist() == [2, 2]
    assert np.isnan(scores["r_squared"]).all()
    assert np.isnan(scores["concordance"]).all()
    assert part_scores(nan, nan, *rest)["n"].tolist() == [0, 0]
    assert np.isnan(weighted_mean(np.array([1.0, 2.0]), np.zeros((1, 2)))).all()


def test_coverage_counts_ends_as_inside():
    observed = np.array([0.1, 0.2, 0.3, 0.4])
    inside = inside_interval(observed, np.array([0.1, 0.25, 0.0, 0.0]), np.array([0.2, 0.3, 0.3, 0.39]))
    assert inside.tolist() == [1, 0, 1, 0]
    low = np.array([0.001, 0.004, 0.006, 0.1])
    assert inside_interval(np.zeros(4), low, np.full(4, 0.2), limit=0.005).tolist() == [1, 1, 0, 0]


def test_interval_score_by_hand():
    # Gneiting & Raftery (2007), eq. 43 with alpha = 0.1: (u - l) + 20 (l - x) below, + 20 (x - u) above.
    found = interval_score(np.array([0.0, 0.5, 0.9]), np.full(3, 0.1), np.full(3, 0.8))
    assert found == pytest.approx([0.7 + 2.0, 0.7, 0.7 + 2.0])


def test_histogram_spreads_what_is_only_known_between_two_ends():
    # One station anywhere in the lower half, one exactly at 0.95.
    found = pit_histogram(np.array([0.0, 0.95]), np.array([0.5, 0.95]))
    assert found[0] == pytest.approx([0.1] * 5 + [0.0] * 4 + [0.5])
    low, high = np.array([0.0, 0.95]), np.array([0.5, 0.95])
    assert pit_histogram(low, high, np.array([[3.0, 1.0]]))[0] == pytest.approx([0.15] * 5 + [0.0] * 4 + [0.25])
    assert np.isnan(pit_histogram(np.array([np.nan]), np.array([np.nan]))).all()


def test_aitchison_distance_of_a_published_pair():
    # Aitchison (1986) distance of (.1,.3,.4,.2) and (1/6,1/6,1/3,1/3): 0.94063887.
    x, y = np.array([[0.1, 0.3, 0.4, 0.2]]), np.array([[1 / 6, 1 / 6, 1 / 3, 1 / 3]])
    assert aitchison_distance(x, y, 1e-6) == pytest.approx([0.94063887], abs=1e-8)
    assert np.isnan(aitchison_distance(np.full((2, 3), np.nan), np.full((2, 3), np.nan), 0.01)).all()


@given(st.integers(0, 2**32 - 1))
def test_classes_agree_with_scikit_learn(seed):
    rng = np.random.default_rng(seed)
    observed, predicted = rng.dirichlet([1, 1, 0.3], (2, 60))
    observed[0, 0] = np.nan
    found = class_agreement(observed, predicted, "folk", 0.01)
    a, b = (classify(f[1:], "folk", trace=0.01) for f in (observed, predicted))
    weights = np.stack([np.ones(60), rng.uniform(0.5, 1, 60)])
    assert found.share(weights)[0] == pytest.approx((a == b).mean())
    assert found.kappa(weights)[0] == pytest.approx(cohen_kappa_score(a, b), abs=1e-12)
    assert found.kappa(weights)[1] == pytest.approx(cohen_kappa_score(a, b, sample_weight=weights[1, 1:]), abs=1e-12)
    np.testing.assert_array_equal(found.confusion, confusion_matrix(a, b, labels=found.codes))


def test_classes_use_the_trace_for_both_and_one_class_has_no_kappa():
    observed, predicted = np.array([[0.5, 0.497, 0.003]]), np.array([[0.51, 0.49, 0.0]])
    found = class_agreement(observed, predicted, "folk", 0.01)
    assert found.share(np.ones((1, 1))).tolist() == [1.0]
    assert np.isnan(found.kappa(np.ones((1, 1)))).all()
    assert class_agreement(observed, np.array([[0.1, 0.9, 0.0]]), "folk", 0.01).share(np.ones((1, 1))) == 0.0


def test_table_has_a_row_for_each_score():
    rng = np.random.default_rng(0)
    observed = rng.dirichlet([1, 1, 1], 30)
    inside = observed - 0.1, observed + 0.1
    draws = DrawScores(np.zeros((30, 3)), np.zeros(30), np.full((30, 3), 0.5), np.full((30, 3), 0.5))
    agreement = class_agreement(observed, observed, "folk", 0.005)
    held = HeldOut("kriging", observed, {0.5: inside, 0.9: inside}, draws, agreement, square_z={"y": np.full(30, 2.0)})
    weights = ScoreWeights(np.full(30, 1 / 30), rng.multinomial(30, np.full(30, 1 / 30), 50).astype(float))
    rows = score_table(("mud", "sand", "gravel"), observed, held, weights, 0.005, {"nearest": observed[::-1]})
    table = {(row.part, row.score): row for row in rows}
    assert table["sand", "rmse"].value == 0.0
    assert table["sand", "skill_over_nearest"].value == 1.0
    assert table["all", "class_agreement"].value == 1.0
    assert table["all", "aitchison_distance"].map_weighted == 0.0
    assert table["gravel", "coverage_90"].value == 1.0
    assert table["gravel", "below_quantile_50"].value == 0.0  # everything stands exactly at the median
    assert table["y", "mean_square_standardised_error"].value == 2.0
    # The bootstrap interval of a proportion holds the binomial one: 30 stations, so about ±0.15 around one half.
    half = (np.arange(30) % 2).astype(float)
    drawn = weighted_mean(half, weights.rows)[2:]
    assert np.quantile(drawn, [0.05, 0.95]) == pytest.approx([0.35, 0.65], abs=0.05)


def test_reach_is_the_upper_whisker_and_no_more_than_the_largest():
    # Meyer & Pebesma (2021): third quartile + 1.5 × interquartile range, capped by the largest.
    assert validated_reach_m(np.array([1.0, 2.0, 3.0, 4.0, 100.0])) == 7.0
    assert validated_reach_m(np.array([1.0, 1.0, 3.0, 4.0])) == 4.0
    far = beyond_reach(np.array([[0.0, 7.0], [0.0, 7.1]]), np.zeros((1, 2)), 7.0)
    assert far.tolist() == [False, True]
