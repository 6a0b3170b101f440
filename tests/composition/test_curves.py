import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy.stats import norm

from texture.composition import SizeCurve, parts_from_weights, percentiles_from_weights
from texture.composition.statistics import kurtosis_words, skewness_words, sorting_words
from texture.errors import CompositionError

INF = float("inf")
# A worked table of the trade's usual shape; its statistics were worked out with numpy from the published formulas.
LIMITS = np.arange(-1.0, 10.0)
WEIGHTS = [1.2, 3.8, 12.5, 31.0, 24.5, 11.0, 6.5, 4.2, 3.1, 2.2]


def table_curve(**kwargs):
    return SizeCurve(LIMITS, WEIGHTS, **{"between": "linear", **kwargs})


def test_percentiles_of_the_worked_table():
    np.testing.assert_allclose(
        table_curve().percentile_phi([5, 10, 16, 25, 50, 75, 84, 90, 95]),
        [1.0, 1.4, 1.88, 2.24194, 3.06122, 4.18182, 5.0, 5.92308, 7.09677],
        atol=1e-5,
    )
    np.testing.assert_allclose(
        1e3 * table_curve().percentile_m([10, 50, 90]), [0.0164807, 0.119806, 0.378929], atol=1e-6
    )


def test_interpolation_in_mm_would_give_another_median():
    mm = 2.0**-LIMITS
    coarser = np.concatenate([[0], np.cumsum(WEIGHTS)]) / 100
    in_mm = np.interp(0.5, coarser, mm)
    assert in_mm == pytest.approx(0.121173, abs=1e-6)
    assert 1e3 * float(table_curve().percentile_m(50)) < in_mm - 1e-3


# Folk & Ward (1957).
def test_graphic_measures_of_the_worked_table():
    result = table_curve().folk_ward()
    assert result.mean_phi == pytest.approx(3.31374, abs=1e-5)
    assert result.sorting_phi == pytest.approx(1.70375, abs=1e-5)
    assert result.skewness == pytest.approx(0.28332, abs=1e-5)
    assert result.kurtosis == pytest.approx(1.28806, abs=1e-5)
    assert result.words == ("poorly sorted", "fine skewed", "leptokurtic")
    assert 1e3 * result.mean_m == pytest.approx(2**-3.31374, abs=1e-5)


def test_moments_of_the_worked_table():
    result = table_curve().moments()
    assert result.mean == pytest.approx(3.378, abs=1e-5)
    assert result.standard_deviation == pytest.approx(1.76723, abs=1e-5)
    assert result.skewness == pytest.approx(0.82237, abs=1e-5)
    assert result.kurtosis == pytest.approx(3.75583, abs=1e-5)


def test_arithmetic_moments_by_hand():
    result = SizeCurve([0, 1, 2], [1, 3]).moments("mm")  # midpoints 0.75 and 0.375 mm
    assert result.mean == pytest.approx(0.75 * 0.25 + 0.375 * 0.75)
    assert result.standard_deviation == pytest.approx(0.375 * np.sqrt(3) / 4)


# Folk & Ward (1957): the measures of a normal and of a uniform curve.
def test_graphic_measures_of_a_normal_curve():
    edges = np.unique(np.concatenate([np.linspace(-6, 6, 241), norm.ppf([0.05, 0.16, 0.25, 0.5, 0.75, 0.84, 0.95])]))
    for between in ("linear", "monotone"):
        result = SizeCurve(edges + 2, np.diff(norm.cdf(edges)), between).folk_ward()
        assert result.mean_phi == pytest.approx(2.0, abs=1e-6)
        assert result.sorting_phi == pytest.approx(0.99566943, abs=1e-6)
        assert result.skewness == pytest.approx(0.0, abs=1e-6)
        assert result.kurtosis == pytest.approx(0.99945231, abs=1e-6)


def test_graphic_measures_of_a_uniform_curve():
    for between in ("linear", "monotone"):
        result = SizeCurve([2, 2.5, 3], [1, 1], between).folk_ward()
        assert result.mean_phi == pytest.approx(2.5, abs=1e-9)
        assert result.sorting_phi == pytest.approx(0.30636364, abs=1e-8)
        assert result.kurtosis == pytest.approx(0.73770492, abs=1e-8)


# Wentworth (1922) takes 0.0625 mm, ISO 14688-1 takes 0.063 mm: the limit is part of the answer.
def test_parts_depend_on_the_cut_size():
    curve = table_curve()
    np.testing.assert_allclose(curve.parts(), [0.27, 0.73, 0.0], atol=1e-12)
    np.testing.assert_allclose(curve.parts((0.063e-3, 2e-3)), [0.27282, 0.72718, 0.0], atol=5e-6)
    np.testing.assert_allclose(curve.parts((0.0625e-3,)), [0.27, 0.73], atol=1e-12)
    np.testing.assert_allclose(curve.finer_than([0.0625e-3, 1.0, 1e-9]), [0.27, 1.0, 0.0], atol=1e-12)


curves = st.builds(
    lambda start, steps, weights: (start + np.concatenate([[0], np.cumsum(steps)]), weights[: len(steps)]),
    st.floats(-6, 2),
    arrays(np.float64, st.integers(2, 12), elements=st.floats(0.1, 2)),
    arrays(np.float64, 12, elements=st.floats(0.01, 1)),
)


@given(curves, st.floats(1e-3, 1e3), st.sampled_from(["monotone", "linear"]))
@settings(max_examples=50)
def test_percentiles_and_finer_than_undo_each_other_in_any_unit(curve, factor, between):
    limits, weights = curve
    one, other = SizeCurve(limits, weights, between), SizeCurve(limits[::-1], weights[::-1] * factor, between)
    asked = np.array([1, 16, 50, 84, 99])
    phi = one.percentile_phi(asked)
    np.testing.assert_allclose(other.percentile_phi(asked), phi, atol=1e-9)
    np.testing.assert_allclose(1 - one.finer_than(1e-3 * 2.0**-phi), asked / 100, atol=1e-9)
    assert (np.diff(phi) > 0).all()
    in_mm = SizeCurve.from_sizes(2.0**-limits, weights, "mm", between)
    np.testing.assert_allclose(in_mm.percentile_phi(asked), phi, atol=1e-8)


@given(curves, st.sampled_from(["passing", "retained"]))
@settings(max_examples=30)
def test_cumulative_tables_make_the_same_curve(curve, kind):
    limits, weights = curve
    coarser = np.concatenate([[0], np.cumsum(weights)]) / weights.sum()
    shares = 100 * (coarser if kind == "retained" else 1 - coarser)
    made = SizeCurve.from_cumulative(limits, shares, kind=kind, total=100)
    np.testing.assert_allclose(made.percentile_phi([5, 50, 95]), SizeCurve(limits, weights).percentile_phi([5, 50, 95]))


def test_cumulative_tables_leave_their_ends_open():
    curve = SizeCurve.from_cumulative([2.0, 0.5, 0.063], [97, 60, 4], unit="mm", total=100)
    assert repr(curve).startswith("SizeCurve(4 classes from -1 to 3.989 phi, open coarse end with 0.03, open fine end")
    np.testing.assert_allclose(curve.parts((0.063e-3, 2e-3)), [0.04, 0.93, 0.03], atol=1e-12)
    with pytest.raises(CompositionError, match="do not run from 0 to 100 in order"):
        SizeCurve.from_cumulative([2.0, 0.5], [60, 97], unit="mm", total=100)


def test_open_ends_are_refused_until_closed():
    curve = SizeCurve([-INF, 0, 1, 2, INF], [10, 30, 40, 20])
    assert float(curve.percentile_phi(40)) == pytest.approx(1.0)
    with pytest.raises(CompositionError, match=r"percentile 5 lies in the open end .*measured is 10 to 80 %"):
        curve.percentile_phi(5)
    with pytest.raises(CompositionError, match=r"0\.1 mm lies in the open end"):
        curve.finer_than(0.1e-3)
    with pytest.raises(CompositionError, match="has an open end, and moments need"):
        curve.moments()
    closed = curve.closed(coarse_phi=-1, fine_phi=4)
    assert float(closed.percentile_phi(5)) == pytest.approx(-0.5, abs=0.2)
    assert closed.moments().mean == pytest.approx(-0.5 * 0.1 + 0.5 * 0.3 + 1.5 * 0.4 + 3 * 0.2)
    with pytest.raises(CompositionError, match="the fine end is closed already"):
        closed.closed(fine_phi=5)


def test_the_middle_of_an_empty_class_is_its_percentile():
    assert float(SizeCurve([0, 1, 3, 4], [1, 0, 1], "linear").percentile_phi(50)) == pytest.approx(2.0)


def test_a_fine_tail_takes_the_mass_that_passed_the_sieves():
    sieves = SizeCurve([-1, 0, 1, 2, 3, 4, INF], [5, 10, 20, 25, 20, 20])
    laser = SizeCurve([3, 4, 5, 6, 7, 8], [50, 20, 15, 10, 5])  # sees a little sand as well
    curve = sieves.joined(laser)
    np.testing.assert_allclose(curve.limits_phi, np.arange(-1, 9))
    np.testing.assert_allclose(curve.weights, [0.05, 0.1, 0.2, 0.25, 0.2, 0.08, 0.06, 0.04, 0.02])
    higher = sieves.joined(laser, at_phi=3)
    np.testing.assert_allclose(higher.weights[4:], 0.4 * np.array([0.5, 0.2, 0.15, 0.1, 0.05]))
    with pytest.raises(CompositionError, match="no size in common"):
        sieves.joined(SizeCurve([6, 7, 8], [1, 1]))
    with pytest.raises(CompositionError, match="expected a limit of"):
        sieves.joined(laser, at_phi=3.3)


def test_many_samples_at_once_are_the_same_as_one_by_one():
    rows = np.random.default_rng(8).uniform(0, 1, (6, 10))
    rows[2, 3] = np.nan
    rows[4] = 0
    together = parts_from_weights(LIMITS, rows, (1e-4, 1e-3))
    assert np.isnan(together[[2, 4]]).all()
    for i in (0, 1, 3, 5):
        np.testing.assert_allclose(together[i], SizeCurve(LIMITS, rows[i]).parts((1e-4, 1e-3)), atol=1e-14)
    np.testing.assert_allclose(together[[0, 1, 3, 5]].sum(axis=1), 1.0, atol=1e-14)


def test_the_tidy_table_leaves_out_what_was_not_measured():
    lines = table_curve().table()
    values = {(line.statistic, line.method, line.unit): line.value for line in lines}
    assert values["d50", "percentile", "mm"] == pytest.approx(0.119806, abs=1e-6)
    assert values["sorting", "folk_ward", "phi"] == pytest.approx(1.70375, abs=1e-5)
    open_ended = SizeCurve([0, 1, 2, INF], [30, 50, 20]).table()
    assert {line.method for line in open_ended} == {"percentile"}
    assert "d10" not in {line.statistic for line in open_ended}


# Folk & Ward (1957), Folk (1966), from memory; a limit belongs to the larger value.
def test_words_of_the_published_scales():
    assert [sorting_words(s) for s in (0.2, 0.35, 0.6, 0.8, 1.5, 3, 5)] == [
        "very well sorted",
        "well sorted",
        "moderately well sorted",
        "moderately sorted",
        "poorly sorted",
        "very poorly sorted",
        "extremely poorly sorted",
    ]
    assert [skewness_words(s) for s in (-0.5, -0.2, 0, 0.2, 0.5)] == [
        "strongly coarse skewed",
        "coarse skewed",
        "near symmetrical",
        "fine skewed",
        "strongly fine skewed",
    ]
    assert [kurtosis_words(k) for k in (0.5, 0.8, 1, 1.3, 2, 4)] == [
        "very platykurtic",
        "platykurtic",
        "mesokurtic",
        "leptokurtic",
        "very leptokurtic",
        "extremely leptokurtic",
    ]


@pytest.mark.parametrize(
    ("limits", "weights", "message"),
    [
        ([0, 1, 1], [1, 1], "expected rising or falling without repeats"),
        ([0, 1, 2], [1, -1], "a weight is negative, infinite or missing"),
        ([0, 1, 2], [1, np.nan], "a weight is negative, infinite or missing"),
        ([0, 1, 2], [0, 0], "all weights are zero"),
        ([0, 1, 2], [1], "expected one limit more than weights"),
        ([-INF, 0, INF], [1, 1], "expected at least two that are finite"),
    ],
)
def test_curves_that_make_no_sense_are_refused(limits, weights, message):
    with pytest.raises(CompositionError, match=message):
        SizeCurve(limits, weights)


def test_one_grain_size_has_no_skewness():
    with pytest.raises(CompositionError, match="in one size class"):
        SizeCurve([0, 1, 2], [1, 0]).moments()


@settings(max_examples=40, deadline=None)
@given(
    arrays(np.float64, (3, 10), elements=st.sampled_from([0.0, 0.0, 0.5, 1.0, 3.0, 20.0])),
    st.sampled_from([5.0, 50.0, 84.0]),
    st.sampled_from(["monotone", "linear"]),
)
def test_percentiles_of_many_samples_are_those_of_each(weights, percent, between):
    weights[:, 0] += 1e-3  # a sample of nothing has no curve
    together = percentiles_from_weights(LIMITS, weights, percent, between)
    alone = [float(SizeCurve(LIMITS, row, between).percentile_phi(percent)) for row in weights]
    np.testing.assert_allclose(together, alone, atol=1e-9)


def test_a_percentile_in_an_open_end_is_not_measured():
    found = percentiles_from_weights([-INF, 0.0, 1.0, INF], [[60.0, 20.0, 20.0], [20.0, 60.0, 20.0], [0, 0, 0]], 50.0)
    np.testing.assert_allclose(found, [np.nan, 0.5, np.nan])
