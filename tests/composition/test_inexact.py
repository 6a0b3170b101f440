import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import ndtr

from texture.composition import LogRatio, close
from texture.composition.inexact import from_intervals, from_median, from_mud_and_sand
from texture.errors import CompositionError

NAN = float("nan")
PARTS = ["mud", "sand", "gravel"]
BARE = LogRatio(PARTS, detection_limit=1e-9)


def one(logratio, low, high):
    mean, variance = from_intervals(logratio, [low], [high])
    return mean[0], variance[0]


def test_below_one_percent_by_hand():
    # ln of a uniform on (0, c) has mean ln c - 1 and variance 1.
    mean, variance = one(BARE, [0.4, 0.0, 0.0], [0.4, 1.0, 0.01])
    assert mean[0] == pytest.approx(np.log(0.4 / 0.6), abs=1e-12)
    assert variance[0] == pytest.approx(0.0, abs=1e-12)
    assert mean[1] == pytest.approx(np.log(0.01 / 0.6) - 1, abs=0.03)
    assert variance[1] == pytest.approx(1.0, rel=0.05)


def test_below_ten_percent_beside_rounded_neighbours_by_brute_force():
    # "<10", 60, 40: mud evenly below a tenth, sand and gravel make room for it three to two, and are rounded to a percent.
    rng = np.random.default_rng(3)
    mud = rng.uniform(0, 0.1, 1_000_000)
    sand, gravel = (v + rng.uniform(-0.005, 0.005, mud.size) for v in (0.6 * (1 - mud), 0.4 * (1 - mud)))
    drawn = np.column_stack([mud, sand, gravel])
    for lr in (BARE, LogRatio(PARTS)):
        brute = lr.forward(drawn / drawn.sum(axis=1, keepdims=True))
        mean, variance = one(lr, [0.0, 0.54, 0.36], [0.1, 0.6, 0.4])
        np.testing.assert_allclose(mean, brute.mean(axis=0), atol=0.02)
        assert variance[0] == pytest.approx(brute[:, 0].var(), rel=0.05)
        # Limits know no ratio: sand against gravel is a little wider than rounding alone makes it.
        assert brute[:, 1].var() < variance[1] < 0.002


def test_which_column_is_below_a_limit_does_not_matter():
    low, high = np.array([0.0, 0.54, 0.36]), np.array([0.1, 0.6, 0.4])
    for order in ([0, 1, 2], [1, 0, 2], [2, 1, 0]):
        lr = LogRatio([PARTS[i] for i in order], tree=("mud", ("gravel", "sand")), detection_limit=1e-9)
        assert one(lr, low[order], high[order])[1][0] == pytest.approx(1.0, rel=0.1)


def test_sand_only_by_hand():
    # Mud anywhere between 0 and 0.3.
    mud = (np.arange(200_000) + 0.5) / 200_000 * 0.3
    y1, y2 = np.log(mud / (1 - mud)), np.log((0.3 - mud) / 0.7)
    mean, variance = one(BARE, [NAN, 0.7, NAN], [NAN, 0.7, NAN])
    np.testing.assert_allclose(mean, [y1.mean(), y2.mean()], atol=0.03)
    np.testing.assert_allclose(variance, [y1.var(), y2.var()], rtol=0.05)


def test_above_95_percent_mud_says_nothing_of_gravel_against_sand():
    for lr in (BARE, LogRatio(PARTS)):
        mean, variance = one(lr, [0.95, 0, 0], [1, 1, 1])
        assert mean[0] > np.log(0.95 / 0.05)
        assert variance[0] > 0.3
        assert np.isnan(mean[1])
        assert np.isnan(variance[1])


def test_no_knowledge_is_nan_and_not_a_wide_guess():
    for kind in ("tree", "alr", "ilr", "shares"):
        mean, variance = one(LogRatio(PARTS, kind), [NAN] * 3, [NAN] * 3)
        assert np.isnan(mean).all()
        assert np.isnan(variance).all()


@given(st.lists(st.floats(0.02, 1), min_size=3, max_size=3), st.sampled_from(["tree", "ilr", "alr", "shares"]))
@settings(max_examples=30)
def test_exact_rows_are_what_forward_makes_of_them(raw, kind):
    row = close(raw)
    mean, variance = one(LogRatio(PARTS, kind), row, row)
    np.testing.assert_allclose(mean, LogRatio(PARTS, kind).forward(row), atol=1e-9)
    np.testing.assert_allclose(variance, 0.0, atol=1e-12)


@given(st.lists(st.floats(0.1, 1), min_size=3, max_size=3), st.floats(0.001, 0.05), st.permutations(range(3)))
@settings(max_examples=30)
def test_intervals_hold_the_truth_and_know_no_column_order(raw, half, order):
    row, order = close(raw), list(order)
    low, high = np.maximum(row - half, 0), np.minimum(row + half * np.array([1, 1.3, 1.7]), 1)
    mean, variance = one(BARE, low, high)
    assert (np.abs(mean - BARE.forward(row)) < 5 * np.sqrt(variance) + 0.05).all()
    turned = LogRatio([PARTS[i] for i in order], detection_limit=1e-9)
    other, spread = one(turned, low[order], high[order])
    np.testing.assert_allclose(other, mean, atol=1e-9)
    np.testing.assert_allclose(spread, variance, atol=1e-9)


def test_mud_and_sand_leave_gravel_unknown():
    mean, variance = from_mud_and_sand(BARE, [0.5, 1.0])
    g = (np.arange(100_000) + 0.5) / 100_000
    share = 0.5 * (1 - g)
    y1 = np.log(share / (1 - share))
    assert mean[0, 0] == pytest.approx(y1.mean(), abs=0.03)
    assert variance[0, 0] == pytest.approx(y1.var(), rel=0.05)
    assert np.isnan(mean[:, 1]).all()
    # A tree that splits gravel off first knows mud against sand in full.
    first = LogRatio(PARTS, tree=[["mud", "sand"], "gravel"])
    mean, variance = from_mud_and_sand(first, [0.2], gravel_logit=(-3.0, 1.0))
    assert np.isnan(mean[0, 0])
    assert mean[0, 1] == pytest.approx(np.log(0.25), abs=1e-9)
    assert variance[0, 1] == pytest.approx(0.0, abs=1e-9)


def test_a_known_gravel_content_narrows_mud():
    wide = from_mud_and_sand(BARE, [0.5])[1][0, 0]
    narrow = from_mud_and_sand(BARE, [0.5], gravel_logit=(-3.0, 1.0))[1][0, 0]
    assert narrow < 0.1 * wide


def test_a_median_places_the_bed():
    lr = LogRatio(PARTS)
    mean, variance = from_median(lr, [1.5, 4.0, 6.0, -2.0])
    mud = lr.inverse(np.nan_to_num(mean))[:, 0]
    assert (np.diff(mud[:3]) > 0).all()
    assert mud[1] == pytest.approx(0.5, abs=1e-6)  # half is finer than the median
    assert np.isnan(mean[2, 1])  # gravel against sand in a mud
    assert mean[3, 1] > 0  # the half that is coarser is gravel
    assert (variance[~np.isnan(variance)] >= 0.25 - 1e-9).all()


def test_a_median_by_hand():
    # Sorting even in its logarithm between 1 and 1.0001: mud is Phi((2.5 - 4) / 1) for a normal curve in phi.
    mean, variance = from_median(BARE, [2.5], sorting_phi=(1.0, 1.0001))
    mud, gravel = ndtr(-1.5), ndtr(-3.5)
    np.testing.assert_allclose(
        mean[0], [np.log(mud / (1 - mud)), np.log(gravel / (1 - mud - gravel))], rtol=0, atol=1e-3
    )
    np.testing.assert_allclose(variance[0], 0.25, atol=1e-6)


def test_nan_rows_stay_nan():
    for mean, variance in (from_median(BARE, [NAN, 2.0]), from_mud_and_sand(BARE, [NAN, 0.5])):
        assert np.isnan(mean[0]).all()
        assert np.isnan(variance[0]).all()
        assert np.isfinite(mean[1, 0])


@pytest.mark.parametrize(
    ("low", "high"),
    [
        ([0.5, 0.5, 0.5], [0.6, 0.6, 0.6]),
        ([0.2, 0, 0], [0.1, 1, 1]),
        ([0, 0, 0], [0.1, 0.1, 0.1]),
        ([0, 0, 0], [2, 1, 1]),
    ],
)
def test_limits_that_nothing_meets_are_refused(low, high):
    with pytest.raises(CompositionError, match=r"row 1 .*expected rising limits in \[0, 1\]"):
        from_intervals(BARE, [[NAN] * 3, low], [[NAN] * 3, high])


def test_other_parts_are_refused():
    with pytest.raises(CompositionError, match="expected mud, sand, gravel"):
        from_median(LogRatio(["clay", "silt"]), [2.0])
    with pytest.raises(CompositionError, match="shares from 0 to 1"):
        from_mud_and_sand(BARE, [30.0])
