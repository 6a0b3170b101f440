"""Scores against scikit-learn, scipy or a hand computation."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sklearn.metrics import mean_absolute_error, r2_score, root_mean_squared_error

from texture.validation.reach import beyond_reach, validated_reach_m
from texture.validation.scores import aitchison_error, class_agreement, concordance, part_scores, score_table

NAN = np.full(50, np.nan)


@given(st.integers(0, 2**32 - 1))
def test_scores_equal_scikit_learn(seed):
    rng = np.random.default_rng(seed)
    observed, predicted = rng.uniform(0, 1, (2, 50))
    scores = part_scores(observed, predicted, NAN, NAN)
    assert scores["r_squared"] == pytest.approx(r2_score(observed, predicted), abs=1e-12)
    assert scores["rmse"] == pytest.approx(root_mean_squared_error(observed, predicted), abs=1e-12)
    assert scores["mean_absolute_error"] == pytest.approx(mean_absolute_error(observed, predicted), abs=1e-12)
    assert scores["mean_error"] == pytest.approx((predicted - observed).mean(), abs=1e-12)
    assert np.isnan(scores["coverage_90"])


def test_concordance_by_hand():
    # Lin (1989): 2 s_xy / (s_x² + s_y² + (mean difference)²) with population variances.
    observed, predicted = np.array([1.0, 2.0, 3.0, 4.0]), np.array([1.5, 2.0, 2.5, 4.0])
    s_xy = ((observed - 2.5) * (predicted - 2.5)).mean()
    assert concordance(observed, predicted) == pytest.approx(2 * s_xy / (1.25 + predicted.var()))
    assert concordance(observed, observed) == pytest.approx(1.0)


def test_unknown_rows_are_left_out_and_constant_rows_do_not_divide_by_zero():
    scores = part_scores(np.array([0.2, np.nan, 0.2]), np.array([0.2, 0.9, 0.2]), *np.full((2, 3), np.nan))
    assert scores["n"] == 2
    assert np.isnan(scores["r_squared"])
    assert part_scores(*np.full((4, 3), np.nan)) == {"n": 0.0}


def test_coverage_counts_ends_as_inside():
    observed = np.array([0.1, 0.2, 0.3, 0.4])
    scores = part_scores(observed, observed, np.array([0.1, 0.25, 0.0, 0.0]), np.array([0.2, 0.3, 0.3, 0.39]))
    assert scores["coverage_90"] == 0.5
    zeros = part_scores(
        np.zeros(4), np.full(4, 0.01), np.array([0.001, 0.004, 0.006, 0.1]), np.full(4, 0.2), limit=0.005
    )
    assert zeros["coverage_90"] == 0.5


def test_aitchison_distance_of_a_published_pair():
    # Aitchison (1986) distance of (.1,.3,.4,.2) and (1/6,1/6,1/3,1/3): 0.94063887.
    x, y = np.array([[0.1, 0.3, 0.4, 0.2]]), np.array([[1 / 6, 1 / 6, 1 / 3, 1 / 3]])
    assert aitchison_error(x, y, 1e-6) == pytest.approx(0.94063887, abs=1e-8)
    assert np.isnan(aitchison_error(np.full((2, 3), np.nan), np.full((2, 3), np.nan), 0.01))


def test_class_agreement_uses_the_trace_for_both():
    observed, predicted = np.array([[0.5, 0.497, 0.003]]), np.array([[0.51, 0.49, 0.0]])
    assert class_agreement(observed, predicted, "folk", 0.01) == 1.0
    assert class_agreement(observed, np.array([[0.1, 0.9, 0.0]]), "folk", 0.01) == 0.0


def test_table_has_a_row_for_each_score():
    rng = np.random.default_rng(0)
    observed = rng.dirichlet([1, 1, 1], 30)
    rows = score_table(("mud", "sand", "gravel"), observed, observed, observed - 0.1, observed + 0.1, 0.005)
    table = {(row["part"], row["score"]): row["value"] for row in rows}
    assert table["sand", "rmse"] == 0.0
    assert table["all", "class_agreement"] == 1.0
    assert table["all", "aitchison_distance"] == 0.0
    assert table["gravel", "coverage_90"] == 1.0


def test_reach_is_the_upper_whisker_and_no_more_than_the_largest():
    # Meyer & Pebesma (2021): third quartile + 1.5 × interquartile range, capped by the largest.
    assert validated_reach_m(np.array([1.0, 2.0, 3.0, 4.0, 100.0])) == 7.0
    assert validated_reach_m(np.array([1.0, 1.0, 3.0, 4.0])) == 4.0
    far = beyond_reach(np.array([[0.0, 7.0], [0.0, 7.1]]), np.zeros((1, 2)), 7.0)
    assert far.tolist() == [False, True]
