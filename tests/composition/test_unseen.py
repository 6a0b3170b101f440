"""What lies below a limit: by simulation, by hand, and what is refused."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import expit

from texture.composition.unseen import unseen_below
from texture.errors import CompositionError


@given(st.floats(0.1, 0.75), st.floats(0.8, 2.0), st.integers(0, 1000))
@settings(max_examples=25, deadline=None)
def test_the_rest_of_a_normal_logit_is_found(share, sd, seed):
    z = np.sort(np.random.default_rng(seed).normal(size=2000))
    cut = float(np.quantile(z, share))
    x = expit(-4.0 + sd * (z - cut))
    limit = float(expit(-4.0))
    found = unseen_below(np.where(x < limit, 0.0, x), limit)
    assert not found.absent
    # The mean of a thousand values below the limit and their extrapolation from those above.
    assert found.mean == pytest.approx(x[x < limit].mean(), rel=0.15)


@given(st.floats(0.1, 0.8), st.integers(0, 1000))
@settings(max_examples=25, deadline=None)
def test_absence_is_told_from_small_values(share, seed):
    rng = np.random.default_rng(seed)
    x = expit(-0.7 + 0.8 * rng.normal(size=300))
    found = unseen_below(np.where(rng.uniform(size=300) < share, 0.0, x), 0.005)
    assert found.absent
    assert found.mean < 1e-5


def test_nothing_below_and_too_few_above():
    assert unseen_below([0.2, 0.3, np.nan], 0.01) == unseen_below([0.3, 0.2], 0.01)
    assert unseen_below([0.2, 0.3], 0.01).mean == 0.0
    few = unseen_below([0.0] * 50 + [0.2] * 9, 0.01)
    assert np.isnan(few.mean)
    assert not few.absent
    assert np.isnan(unseen_below([0.0] * 50 + [0.2] * 30, 0.01).mean)  # one value is no distribution


def test_all_of_a_part_is_no_obstacle():
    rng = np.random.default_rng(2)
    x = np.concatenate([rng.uniform(0.05, 0.9, 60), np.ones(20), np.zeros(40)])
    found = unseen_below(x, 0.005)
    assert 0.0 <= found.mean <= 0.005


@pytest.mark.parametrize(("x", "limit"), [([0.1, 1.2], 0.01), ([-0.1], 0.01), ([0.1], 0.0), ([0.1], 1.0)])
def test_what_makes_no_sense_is_refused(x, limit):
    with pytest.raises(CompositionError, match="expected a limit between 0 and 1, and fractions from 0 to 1"):
        unseen_below(x, limit)
