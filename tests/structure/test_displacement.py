import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.structure import Covariance, CovarianceSet, Structure
from texture.structure.displacement import displacement_variance, place_noise

EXPONENTIAL = Covariance([Structure("exponential", 1.5, 3000.0)], small_scale=0.5, noise=0.2)


def drawn(covariance, accuracy_m, count=400_000):
    """The same variance by drawing displacements, through the covariance matrix instead of the variogram."""
    away = np.random.default_rng(1).uniform(-accuracy_m, accuracy_m, (count, 2))
    smooth = Covariance(covariance.structures, anisotropy=covariance.anisotropy)
    return 2.0 * (smooth.sill - smooth.matrix(np.zeros((1, 2)), away).mean())


@pytest.mark.parametrize("accuracy_m", [40.0, 926.0, 5000.0])
@pytest.mark.parametrize(
    "covariance",
    [
        EXPONENTIAL,
        Covariance([Structure("spherical", 1.0, 2000.0), Structure("matern", 0.5, 9000.0, smoothness=1.5)]),
        Covariance([Structure("exponential", 1.0, 4000.0)], anisotropy=(30.0, 5.0)),
    ],
)
def test_variance_is_that_of_drawn_displacements(covariance, accuracy_m):
    assert displacement_variance(covariance, [accuracy_m])[0] == pytest.approx(drawn(covariance, accuracy_m), rel=0.01)


@given(st.floats(0.0, 1e7), st.floats(1.0, 10.0))
def test_it_grows_with_the_displacement_up_to_twice_the_sill(accuracy_m, times):
    less, more = displacement_variance(EXPONENTIAL, [accuracy_m, accuracy_m * times])
    assert 0.0 <= less <= more <= 3.0 + 1e-9


def test_exact_unknown_and_unstructured_places_have_none():
    assert (displacement_variance(EXPONENTIAL, [0.0, np.nan]) == 0.0).all()
    assert (displacement_variance(Covariance([], small_scale=1.0), [500.0]) == 0.0).all()
    beside_covariates = Covariance([Structure("exponential", 1.5, 3000.0)], axis_scales=(1.0, 1.0, 50.0))
    np.testing.assert_allclose(
        displacement_variance(beside_covariates, [926.0]), displacement_variance(EXPONENTIAL, [926.0])
    )


def test_what_is_lost_among_neighbours_is_no_noise():
    both = CovarianceSet([EXPONENTIAL, EXPONENTIAL])
    noise = place_noise(both, np.array([0.5, 926.0, 926.0]), np.array([[0.0, 0.0], [1.0, np.nan], [1.0, 1.0]]))
    assert (noise[0] == 0.0).all()
    assert noise[1, 1] == 0.0
    assert (noise[2] > 0.9).all()
