import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.bed import make_bed, single_fractions

from .test_build import coast, random_map, settings_of


def test_the_step_left_over_goes_to_the_class_that_lost_most():
    step = 2.0**-24
    fraction = np.array([[0.5 - 0.6 * step], [0.25 + 0.3 * step], [0.25 + 0.3 * step]])
    stored = single_fractions(fraction)[:, 0]
    # Rounded down: 0.5 - 1 step, 0.25, 0.25; one step is left, and the first lost 0.4, the others 0.3 of one.
    assert stored.tolist() == [0.5, 0.25, 0.25]


@given(st.lists(st.floats(0.0, 1.0), min_size=1, max_size=9).filter(lambda f: sum(f) > 1e-6), st.randoms())
def test_sums_are_one_in_any_order(values, random):
    fraction = np.array(values) / sum(values)
    stored = single_fractions(fraction[:, None])[:, 0]
    assert stored.dtype == np.float32
    random.shuffle(order := list(range(stored.size)))
    total = np.float32(0.0)
    for i in order:
        total += stored[i]
    assert total == np.float32(1.0)
    assert np.abs(stored - fraction).max() <= 2.0**-24
    assert (stored[fraction == 0.0] == 0.0).all()


def test_cells_without_a_bed_stay_without():
    fraction = np.array([[1.0, np.nan, 0.3], [0.0, np.nan, 0.7]])
    assert np.isnan(single_fractions(fraction)).tolist() == [[False, True, False], [False, True, False]]


def test_a_whole_bed_keeps_its_sums():
    target = coast()
    bed = make_bed(*random_map(target), target, settings_of())
    stored = single_fractions(bed.class_fraction)
    assert stored.shape == bed.class_fraction.shape
    assert (stored.sum(axis=0) == 1.0).all()
    assert stored == pytest.approx(bed.class_fraction, abs=2.0**-24)
