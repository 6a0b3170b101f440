import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from texture.bed.mixture import mean_critical_stress, median_diameter
from texture.bed.mixture_packing import mixture_packing
from texture.bed.packing import porosity

SIZES = np.array([20e-6, 250e-6, 8e-3])


def test_one_class_has_its_own_median_whatever_the_order():
    order = [2, 0, 1]
    assert median_diameter(np.eye(3)[order], SIZES[order]) == pytest.approx(SIZES, rel=1e-12)


def test_by_hand():
    # 60 % of 20 µm: half its mass at 0.3, the next class's at 0.8; a half is 0.4 of the way in logarithm
    found = median_diameter(np.array([0.6, 0.4, 0.0]), SIZES)
    assert found == pytest.approx(20e-6 * (250 / 20) ** 0.4, rel=1e-12)


def test_classes_without_mass_between_two_halves():
    assert median_diameter(np.array([0.5, 0.0, 0.5]), SIZES) == pytest.approx(250e-6, rel=1e-12)
    four = np.array([0.7, 0.0, 0.0, 0.3])
    sizes = np.array([1e-5, 1e-4, 2e-4, 1e-3])
    # 0.35 at 1e-5, 0.7 at 1e-4
    assert median_diameter(four, sizes) == pytest.approx(1e-5 * 10 ** (0.15 / 0.35), rel=1e-12)


@given(arrays(float, 3, elements=st.floats(0.0, 1.0)).filter(lambda a: a.sum() > 1e-6), st.floats(0.0, 1.0))
def test_within_the_sizes_and_never_finer_when_mass_moves_to_coarser(weights, moved):
    fraction = weights / weights.sum()
    coarser = fraction + np.array([-moved * fraction[0], 0.0, moved * fraction[0]])
    before, after = median_diameter(np.column_stack([fraction, coarser]), SIZES)
    assert SIZES[0] * (1 - 1e-9) <= before <= after * (1 + 1e-9) <= SIZES[2] * (1 + 1e-9)


def test_unknown_fractions_stay_unknown():
    assert np.isnan(median_diameter(np.array([[np.nan], [0.5], [0.5]]), SIZES)).all()


def test_packing_by_hand():
    fraction, density = np.array([[0.5], [0.5]]), np.array([2000.0, 3000.0])
    pores, dry = mixture_packing(fraction, density, np.array([250e-6]))
    assert pores == pytest.approx(porosity([250e-6]))
    # two grain volumes add up: 1 kg takes 0.5/2000 + 0.5/3000 m3 of grains
    assert dry == pytest.approx((1.0 - pores) / (0.5 / 2000 + 0.5 / 3000))


def test_mud_packs_more_loosely_than_sand():
    # common practice, no source: dry density of fresh fine mud is less than half that of clean sand
    _, dry = mixture_packing(np.eye(2), np.array([2650.0, 2650.0]), np.array([4e-6, 250e-6]))
    assert dry[0] / dry[1] < 0.5


def test_critical_stress_of_a_mixture():
    fraction = np.array([[0.25, 1.0], [0.75, 0.0]])
    assert mean_critical_stress(fraction, np.array([0.1, 0.5])) == pytest.approx([0.4, 0.1])
    assert np.isnan(mean_critical_stress(fraction, np.array([np.nan, 0.5]))).all()
