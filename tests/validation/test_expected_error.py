"""Error to expect at a distance."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.validation.expected_error import ErrorCurve


@given(st.integers(0, 2**32 - 1), st.integers(1, 400))
@settings(max_examples=30, deadline=None)
def test_error_never_falls_with_distance_and_keeps_the_mean_square(seed, n):
    rng = np.random.default_rng(seed)
    distance, error = rng.uniform(0, 10, n), rng.standard_normal((n, 3))
    curve = ErrorCurve.learn(distance, np.zeros((n, 3)), error)
    found = curve.at(np.linspace(0, 20, 50))
    assert (np.diff(found) >= -1e-12).all()
    sizes = [len(b) for b in np.array_split(np.arange(n), len(curve.distance))]
    assert np.average(curve.square, weights=sizes) == pytest.approx((error**2).mean())


def test_error_that_grows_is_found():
    rng = np.random.default_rng(1)
    distance = rng.uniform(0, 10, 4000)
    error = (0.1 * distance)[:, None] * rng.standard_normal((4000, 3))
    assert ErrorCurve.learn(distance, np.zeros((4000, 3)), error).at(np.array([3.0, 8.0])) == pytest.approx(
        [0.3, 0.8], rel=0.1
    )


def test_without_scored_stations_nothing_is_known():
    curve = ErrorCurve.learn(np.arange(5.0), np.full((5, 3), np.nan), np.zeros((5, 3)))
    assert np.isnan(curve.at(np.array([1.0]))).all()
