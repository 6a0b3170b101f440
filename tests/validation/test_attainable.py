"""R² attainable given the noise of repeats: by hand, its property, too few repeats."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.validation.attainable import Repeats, attainable_text, r_squared_attainable, repeated_places
from texture.validation.scores import r_squared


def test_by_hand():
    # Five places: pairs with sd² 0.01, 0.01, 0.04, 0.04 and a triple with 0.02; two single samples.
    count = np.array([2, 2, 2, 2, 3, 1, 1])
    sd = np.sqrt([0.01, 0.01, 0.04, 0.04, 0.02, np.nan, np.nan])
    observed = np.array([0.0, 1.0, 0.0, 1.0, 0.5, 0.0, 1.0])
    # Pooled: (0.10 + 2 × 0.02) / 6 = 7/300; mean of 1/r: (4 × 1/2 + 1/3 + 2) / 7 = 13/21; variance 6 × 0.25 / 7 = 3/14.
    expected = 1.0 - (7 / 300) * (13 / 21) / (3 / 14)
    assert r_squared_attainable(observed, Repeats(count, sd))[0] == pytest.approx(expected, rel=1e-12)
    assert repeated_places(observed, Repeats(count, sd)) == 5


def test_predictions_that_know_every_place_attain_it_and_no_more():
    rng = np.random.default_rng(3)
    truth = rng.uniform(0.2, 0.8, 4000)
    samples = truth[:, None] + rng.normal(0.0, 0.1, (4000, 2))
    found = r_squared_attainable(samples.mean(axis=1), Repeats(np.full(4000, 2), samples.std(axis=1, ddof=1)))
    attained = r_squared(samples.mean(axis=1), truth)
    assert found[0] == pytest.approx(attained[0], abs=0.01)
    assert 0.8 < attained[0] < 0.9


@given(st.integers(1, 4), st.floats(0.0, 2.0), st.integers(0, 2**32 - 1))
def test_weight_two_is_standing_twice(extra, noise, seed):
    rng = np.random.default_rng(seed)
    observed, sd, count = rng.uniform(size=8), noise * rng.uniform(size=8), rng.integers(2, 5, 8)
    twice = np.concatenate([np.arange(8), np.arange(extra)])
    weights = np.bincount(twice, minlength=8)[None, :].astype(float)
    found = r_squared_attainable(observed, Repeats(count, sd), weights)
    np.testing.assert_allclose(
        found, r_squared_attainable(observed[twice], Repeats(count[twice], sd[twice])), rtol=1e-9
    )
    assert 0.0 <= found[0] <= 1.0


def test_too_few_repeats_and_no_variation_give_no_number():
    four = Repeats(np.array([2, 2, 2, 2, 1, 2]), np.array([0.1, 0.1, 0.1, 0.1, np.nan, 0.1]))
    observed = np.array([0.1, 0.2, 0.3, 0.4, 0.5, np.nan])  # the last is not scored
    assert np.isnan(r_squared_attainable(observed, four)).all()
    assert np.isnan(r_squared_attainable(np.full(5, 0.3), Repeats(np.full(5, 2), np.full(5, 0.1)))).all()
    table = {"r_squared_attainable": np.nan, "repeated_places": 4.0}
    text = attainable_text(("mud", "sand"), lambda part, name: table[name])
    assert (
        text == "R² attainable given the noise of repeats: not known, 4 of 5 places needed were sampled twice or more"
    )
    text = attainable_text(("mud",), lambda part, name: {"r_squared_attainable": 0.913, "repeated_places": 7.0}[name])
    assert text.endswith(": mud 0.91")
