import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from skbio.stats.composition import multi_replace

from texture.composition.closure import (
    centre,
    close,
    clr,
    clr_inverse,
    difference,
    distance,
    inner,
    norm,
    perturb,
    power,
    total_variance,
    variation_matrix,
)
from texture.composition.zeros import replace, replace_pair
from texture.errors import CompositionError

X = np.array([0.1, 0.3, 0.4, 0.2])
Y = np.array([1 / 6, 1 / 6, 1 / 3, 1 / 3])

positive = arrays(np.float64, st.tuples(st.integers(1, 5), st.just(4)), elements=st.floats(1e-6, 1e6, allow_nan=False))


# Aitchison (1986), The Statistical Analysis of Compositional Data; numbers recomputed with scikit-bio.
def test_closure_perturbation_and_powering_of_the_worked_example():
    np.testing.assert_allclose(close([2, 2, 6]), [0.2, 0.2, 0.6], rtol=0, atol=1e-15)
    np.testing.assert_allclose(perturb(X, Y), [0.0625, 0.1875, 0.5, 0.25], atol=1e-8)
    np.testing.assert_allclose(difference(X, Y), [0.14285714, 0.42857143, 0.28571429, 0.14285714], atol=1e-8)
    np.testing.assert_allclose(power(X, 0.1), [0.23059566, 0.25737316, 0.26488486, 0.24714631], atol=1e-8)


def test_aitchison_geometry_of_the_worked_example():
    np.testing.assert_allclose(clr(X), [-0.79451346, 0.30409883, 0.59178090, -0.10136628], atol=1e-8)
    assert inner(X, Y) == pytest.approx(0.33992952, abs=1e-8)
    assert distance(X, Y) == pytest.approx(0.94063887, abs=1e-8)
    assert norm(X) == pytest.approx(1.04125285, abs=1e-8)


@given(positive, st.floats(1e-3, 1e3), st.floats(-3, 3), st.permutations(range(4)))
def test_distance_knows_neither_units_nor_order_nor_a_common_perturbation(parts, factor, exponent, order):
    d = distance(parts, X)
    np.testing.assert_allclose(distance(parts * factor, X), d, atol=1e-9)
    np.testing.assert_allclose(distance(parts[:, order], X[list(order)]), d, atol=1e-9)
    np.testing.assert_allclose(distance(perturb(parts, Y), perturb(X, Y)), d, atol=1e-9)
    np.testing.assert_allclose(distance(power(parts, exponent), power(X, exponent)), abs(exponent) * d, atol=1e-9)
    np.testing.assert_allclose(clr(parts).sum(axis=-1), 0, atol=1e-12)
    np.testing.assert_allclose(clr_inverse(clr(parts)), close(parts), atol=1e-12)


@given(arrays(np.float64, (3, 5), elements=st.floats(0, 1e300)).filter(lambda a: (a.sum(axis=1) > 0).all()))
def test_closed_rows_sum_to_one_to_the_last_bits(parts):
    assert np.abs(close(parts).sum(axis=-1) - 1).max() <= 4.5e-16


def test_nan_rows_stay_nan_and_the_rest_is_closed():
    closed = close([[1, np.nan, 2], [1, 1, 2]])
    assert np.isnan(closed[0]).all()
    np.testing.assert_allclose(closed[1], [0.25, 0.25, 0.5])


@pytest.mark.parametrize(
    ("parts", "message"),
    [
        ([[0.5, 0.5], [-0.1, 1.1]], r"row 1 \(counted from 0\), column 0: found negative \(-0.1\)"),
        ([[0.5, np.inf]], "found infinite"),
        ([[0.0, 0.0]], "found a sum of zero"),
    ],
)
def test_closure_refuses_what_is_no_composition(parts, message):
    with pytest.raises(CompositionError, match=message):
        close(parts)


def test_clr_refuses_a_zero():
    with pytest.raises(CompositionError, match=r"found zero .*replace zeros first"):
        clr([0.0, 1.0])


# Coakley & Rust (1968), as data set 5 of Aitchison (1986). Values recomputed with scikit-bio and numpy.
def test_arctic_lake_centre_and_variation(arctic_lake):
    parts = arctic_lake[:, :3]
    np.testing.assert_allclose(centre(parts), [0.17799805, 0.56374890, 0.25825305], atol=1e-7)
    arithmetic = (parts / parts.sum(axis=1, keepdims=True)).mean(axis=0)
    np.testing.assert_allclose(arithmetic, [0.24203967, 0.45687066, 0.30108967], atol=1e-7)  # which is not the centre
    assert total_variance(parts) == pytest.approx(2.46924179, abs=1e-7)
    variation = variation_matrix(parts)
    np.testing.assert_allclose(
        [variation[0, 1], variation[0, 2], variation[1, 2]], [1.64120401, 4.73149287, 1.03502849], atol=1e-7
    )
    assert variation.sum() / (2 * 3) == pytest.approx(total_variance(parts))  # Aitchison (1986)


# Martín-Fernández et al. (2003); scikit-bio's multi_replace gives the same.
def test_multiplicative_replacement():
    rows = np.array([[0.2, 0.4, 0.4, 0.0], [0.0, 0.5, 0.5, 0.0]])
    replaced = replace(rows, 1 / 16, ratio=1.0)
    np.testing.assert_allclose(replaced, [[0.1875, 0.375, 0.375, 0.0625], [0.0625, 0.4375, 0.4375, 0.0625]], atol=1e-12)
    np.testing.assert_allclose(replaced, multi_replace(rows), atol=1e-12)
    np.testing.assert_allclose(replace([0, 0.6, 0.4], 0.01), [0.0065, 0.5961, 0.3974], atol=1e-12)
    np.testing.assert_allclose(replace([0, 0, 1], 0.01), [0.0065, 0.0065, 0.987], atol=1e-12)


@given(arrays(np.float64, (4, 5), elements=st.floats(0, 1)).filter(lambda a: (a.sum(axis=1) > 0.5).all()))
def test_replacement_keeps_sums_and_ratios_and_leaves_other_rows_alone(raw):
    rows = close(raw)
    replaced = replace(rows, 0.01)
    np.testing.assert_allclose(replaced.sum(axis=1), 1, atol=1e-12)
    for before, after in zip(rows, replaced, strict=True):
        kept = before >= 0.01
        # Additive replacement would change these ratios.
        np.testing.assert_allclose(after[kept] / after[kept].max(), before[kept] / before[kept].max(), rtol=1e-12)
        if kept.all():
            assert (before == after).all()


def test_replacing_both_sides_of_a_split_is_refused_by_nan():
    top, bottom = replace_pair(np.array([0.0, 0.0, 0.3]), np.array([0.001, 0.4, 0.0]), 0.01)
    np.testing.assert_allclose(top, [np.nan, 0.0065, 0.2935])
    np.testing.assert_allclose(bottom, [np.nan, 0.3935, 0.0065])


def test_a_limit_too_large_for_the_row_is_refused():
    with pytest.raises(CompositionError, match="more than the whole"):
        replace([[0.0, 0.0, 0.0, 0.0, 1.0]], 0.5)
