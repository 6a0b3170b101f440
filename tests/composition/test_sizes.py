import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.composition.sizes import find_grades, grade, m_from_phi, phi_from_m, to_phi
from texture.errors import CompositionError


# Krumbein (1934): phi = -log2(d / 1 mm).
def test_phi_of_published_sizes():
    mm = np.array([64, 4, 2, 1, 0.5, 0.25, 0.125, 0.0625, 0.063, 0.00390625, 0.0039, 0.002])
    phi = [-6, -2, -1, 0, 1, 2, 3, 4, 3.988504, 8, 8.002310, 8.965784]
    np.testing.assert_allclose(phi_from_m(mm * 1e-3), phi, atol=1e-6)
    np.testing.assert_allclose(to_phi(mm, "mm"), phi, atol=1e-6)
    np.testing.assert_allclose(to_phi(mm * 1e3, "um"), phi, atol=1e-6)


@given(st.floats(-12, 20))
def test_phi_round_trip(phi):
    assert phi_from_m(m_from_phi(phi)) == pytest.approx(phi, abs=1e-12)


@pytest.mark.parametrize("size", [0.0, -1e-3])
def test_sizes_that_are_none_are_refused(size):
    with pytest.raises(CompositionError, match="expected more than zero"):
        phi_from_m(size)


def test_an_unknown_unit_is_refused():
    with pytest.raises(CompositionError, match="unit = 'inch', expected phi, m, mm, um"):
        to_phi(1.0, "inch")


# Wentworth (1922) with Krumbein's phi, and ISO 14688-1 (from memory).
def test_published_limits():
    np.testing.assert_allclose(phi_from_m(find_grades("wentworth").limits_m), [8, 4, 3, 2, 1, 0, -1, -2, -6, -8])
    assert find_grades("wentworth").grades[1:3] == ("silt", "very fine sand")
    # ISO 14688-1, from memory: clay, fine to coarse silt, sand and gravel, cobble, boulder, large boulder.
    limits_mm = [0.002, 0.0063, 0.02, 0.063, 0.2, 0.63, 2, 6.3, 20, 63, 200, 630]
    np.testing.assert_allclose(find_grades("iso_14688_1").limits_m, np.array(limits_mm) * 1e-3)
    grades = find_grades("iso_14688_1").grades
    assert (grades[0], grades[1], grades[4], grades[9], grades[-1]) == (
        "clay", "fine silt", "fine sand", "coarse gravel", "large boulder",
    )  # fmt: skip


def test_a_grain_on_a_limit_is_of_the_coarser_grade():
    for scale in ("wentworth", "iso_14688_1"):
        grades = find_grades(scale)
        assert grade(grades.limits_m, scale).tolist() == list(grades.grades[1:])
        assert grade(np.multiply(grades.limits_m, 0.999), scale).tolist() == list(grades.grades[:-1])
    assert grade([np.nan, 1e-4]).tolist() == ["", "very fine sand"]
    with pytest.raises(CompositionError, match="grades = 'x', expected one of iso_14688_1, wentworth"):
        grade(1e-3, "x")
