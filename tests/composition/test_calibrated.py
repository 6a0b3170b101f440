import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.composition import calibrate_words

LINE = np.column_stack([np.arange(20) * 1000.0, np.zeros(20)])  # measured, a kilometre apart
NEAR = LINE + np.array([0.0, 400.0])


def words(codes, points, measured):
    n = len(points)
    return calibrate_words(np.array(codes), points, np.full((n, 1), 2.0), np.full((n, 1), 1.5), LINE, measured)


def test_moments_of_table_and_samples_by_hand():
    values = np.where(np.arange(20) < 10, np.where(np.arange(20) % 2, 0.0, 1.0), -5.0)[:, None]
    mean, variance, told = words(["sM"] * 10 + ["S"] * 3, np.vstack([NEAR[:10], NEAR[15:18]]), values)
    # ten samples of mean 0.5 beside sandy mud, the table's 2 counts for eight: (10 × 0.5 + 8 × 2) / 18
    centre = (10 * 0.5 + 8 * 2.0) / 18
    spread = (5 * (1 - centre) ** 2 + 5 * centre**2 + 8 * (1.5 + (2.0 - centre) ** 2)) / 18
    np.testing.assert_allclose(mean[:10, 0], centre)
    np.testing.assert_allclose(variance[:10, 0], spread)
    assert (mean[10:] == 2.0).all()  # three are too few
    assert [(t.code, t.pairs) for t in told] == [("sM", 10)]


def test_samples_further_off_than_usual_say_nothing():
    mean, variance, told = words(["sM"] * 10, NEAR[:10] + np.array([0.0, 2000.0]), np.zeros((20, 1)))
    assert (mean == 2.0).all()
    assert (variance == 1.5).all()
    assert told == []


def test_unknown_values_do_not_count_and_none_measured_is_the_table():
    mean, _, told = words(["sM"] * 10, NEAR[:10], np.where(np.arange(20)[:, None] < 5, np.nan, 0.0))
    assert told == []
    none = calibrate_words(np.array(["sM"]), NEAR[:1], mean[:1], mean[:1], LINE[:0], np.zeros((0, 1)))
    assert none[0] == mean[0]


@given(st.floats(-3.0, 3.0), st.integers(8, 20))
def test_the_centre_lies_between_and_never_loses_spread_below_the_samples(value, count):
    mean, variance, _ = words(["M"] * count, NEAR[:count], np.full((20, 1), value))
    assert min(value, 2.0) - 1e-9 <= mean[0, 0] <= max(value, 2.0) + 1e-9
    assert variance[0, 0] == pytest.approx(
        (count * (value - mean[0, 0]) ** 2 + 8 * (1.5 + (2.0 - mean[0, 0]) ** 2)) / (count + 8)
    )
