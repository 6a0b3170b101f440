import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.special import gamma, kv

from texture.errors import StructureError
from texture.structure import Covariance, CovarianceSet, Structure
from texture.structure.models import scale_factor

MODELS = [
    ("spherical", None),
    ("cubic", None),
    ("exponential", None),
    ("gaussian", None),
    ("matern", 0.5),
    ("matern", 0.7),
    ("matern", 1.5),
    ("matern", 2.5),
    ("matern", 6.0),
]


def at(structure, *distances):
    points = np.column_stack([distances, np.zeros(len(distances))])
    return Covariance([structure]).matrix([[0.0, 0.0]], points)[0]


@pytest.mark.parametrize(("model", "nu"), MODELS)
def test_range_is_where_correlation_is_a_twentieth_or_nothing(model, nu):
    expected = 0.0 if model in ("spherical", "cubic") else 0.05
    assert at(Structure(model, 2.0, 800.0, nu), 0.0, 800.0) == pytest.approx([2.0, 2.0 * expected], abs=1e-12)


def test_models_follow_the_published_conventions():
    # Semivariance at 10, 50, 100, 150 for parameter 100 as the gstat manual defines it: spherical, exp(-h/a),
    # exp(-(h/a)^2), Matérn nu 1.5; recomputed with R gstat 2.1 and GSTools 1.7.
    h = (10.0, 50.0, 100.0, 150.0)
    published = {
        ("spherical", None): (0.1495, 0.6875, 1.0, 1.0),
        ("exponential", None): (0.095163, 0.393469, 0.632121, 0.776870),
        ("gaussian", None): (0.009950, 0.221199, 0.632121, 0.894601),
        ("matern", 1.5): (0.004679, 0.090204, 0.264241, 0.442175),
    }
    for (model, nu), gamma_at in published.items():
        structure = Structure(model, 1.0, 100.0 * scale_factor(model, nu), nu)
        assert structure.scale_m == pytest.approx(100.0)
        assert 1.0 - at(structure, *h) == pytest.approx(gamma_at, abs=1e-6)


@pytest.mark.parametrize("nu", [0.3, 0.5, 1.1, 1.5, 2.5, 8.0])
def test_matern_equals_the_bessel_formula(nu):
    # Formula: Stein (1999), section 2.7, with scipy's Bessel function.
    structure = Structure("matern", 1.0, 500.0, nu)
    h = np.geomspace(0.01, 3000.0, 40)
    x = h / structure.scale_m
    assert at(structure, *h) == pytest.approx(2.0 ** (1.0 - nu) / gamma(nu) * x**nu * kv(nu, x), abs=1e-12)


def test_cubic_by_hand():
    # x = 1/2: 1 - 7/4 + 35/32 - 7/64 + 3/512 = 0.240234375 - exact in binary.
    assert at(Structure("cubic", 1.0, 2.0), 1.0)[0] == 1 - 7 / 4 + 35 / 32 - 7 / 64 + 3 / 512


@given(
    st.sampled_from(MODELS),
    st.floats(1.0, 1e5),
    st.integers(0, 2**32 - 1),
    st.integers(1, 3),
)
def test_matrices_are_symmetric_and_positive_semi_definite(model, range_m, seed, d):
    points = np.random.default_rng(seed).random((25, d)) * 1000.0
    matrix = Covariance([Structure(model[0], 1.0, range_m, model[1])]).matrix(points)
    assert np.array_equal(matrix, matrix.T)
    # 25 correlations within 1e-12 of exact can move an eigenvalue by 25e-12 at most.
    assert np.linalg.eigvalsh(matrix).min() > -3e-11


def test_small_scale_variation_is_shared_only_by_coincident_points():
    c = Covariance([Structure("spherical", 1.0, 100.0)], small_scale=0.25, noise=3.0, survey=2.0)
    assert c.sill == 1.25
    assert c.matrix([[0.0, 0.0], [0.0, 0.0], [1e-3, 0.0]])[0] == pytest.approx([1.25, 1.25, 1.0], abs=1e-4)


def test_anisotropy_lies_along_the_azimuth():
    # Longer axis 30 degrees clockwise from north: (sin 30, cos 30); twice as long as across.
    c = Covariance([Structure("exponential", 1.0, 1200.0)], anisotropy=(30.0, 2.0))
    s, t = math.sin(math.radians(30)), math.cos(math.radians(30))
    along, across = c.matrix([[0.0, 0.0]], [[1200 * s, 1200 * t], [600 * t, -600 * s]])[0]
    assert along == pytest.approx(0.05)
    assert across == pytest.approx(0.05)


def test_axis_scales_stretch_one_coordinate():
    c = Covariance([Structure("exponential", 1.0, 1200.0)], axis_scales=(1.0, 1.0, 40.0))
    assert c.matrix([[0.0, 0.0, 0.0]], [[0.0, 0.0, 30.0]])[0, 0] == pytest.approx(0.05)


def test_records_read_back():
    one = Covariance([Structure("matern", 0.3, 5e3, 1.5), Structure("spherical", 1.0, 900.0)], 0.1, 0.2, 0.3, (10, 3))
    pair = CovarianceSet([one, one], [[1.0, -0.4], [-0.4, 1.0]])
    assert Covariance.from_dict(one.to_dict()) == one
    assert CovarianceSet.from_dict(pair.to_dict()) == pair


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Structure("spheric", 1.0, 1.0), "found 'spheric', expected one of cubic, exponential"),
        (lambda: Structure("exponential", -1.0, 1.0), "sill: found -1.0"),
        (lambda: Structure("exponential", 1.0, math.nan), "range_m: found nan"),
        (lambda: Structure("matern", 1.0, 1.0), "smoothness of matern: found None"),
        (lambda: Structure("gaussian", 1.0, 1.0, 1.5), "smoothness of gaussian"),
        (lambda: Covariance([]), "no structure, small-scale variation or noise"),
        (lambda: Covariance([Structure("cubic", 1.0, 1.0)]).matrix(np.zeros((2, 4))), "valid in 3 at most"),
        (lambda: Covariance([], 1.0, anisotropy=(0.0, 0.5)), "longer over shorter range >= 1"),
        (lambda: Covariance([], 1.0).matrix([[0.0, np.inf]]), "row 0 has a coordinate"),
        # A coregionalisation that is not positive semi-definite must be refused (Wackernagel 2003).
        (lambda: CovarianceSet([Covariance([], 1.0)] * 2, [[1, 1.2], [1.2, 1]]), "not positive semi-definite"),
        (lambda: Covariance.from_dict({"sill": 1}), r"found keys \['sill'\]"),
    ],
)
def test_nonsense_is_refused(make, message):
    with pytest.raises(StructureError, match=message):
        make()
