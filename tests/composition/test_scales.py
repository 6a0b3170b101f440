import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import lognorm, norm

from texture.composition import Scale
from texture.errors import CompositionError


def test_the_mean_of_a_lognormal_is_scipys():
    assert Scale("log").expected(0.3, 0.49) == pytest.approx(lognorm.mean(0.7, scale=np.exp(0.3)), rel=1e-12)


def test_the_mean_of_a_log_odds_is_the_integral():
    def mean(m, v):
        return quad(lambda z: 100.0 / (1.0 + np.exp(-(m + np.sqrt(v) * z))) * norm.pdf(z), -10, 10)[0]

    found = Scale("logit", 100.0).expected([-2.0, 0.0, 1.0], [0.5, 4.0, 2.0])
    np.testing.assert_allclose(found, [mean(-2.0, 0.5), 50.0, mean(1.0, 2.0)], atol=1e-5)


@given(st.floats(1e-3, 99.0), st.sampled_from([Scale("plain"), Scale("log"), Scale("logit", 100.0)]))
def test_there_and_back_and_the_slope_between(value, scale):
    assert scale.back(scale.forward(value)) == pytest.approx(value, rel=1e-9)
    step = 1e-5 * value
    rise = (scale.forward(value + step) - scale.forward(value - step)) / (2 * step)
    assert scale.slope(value) == pytest.approx(float(rise), rel=1e-4)


def test_what_a_scale_cannot_hold_is_nan():
    assert np.isnan(Scale("log").forward([0.0, -1.0, np.nan])).all()
    assert np.isnan(Scale("logit", 100.0).forward([0.0, 100.0, 101.0])).all()
    assert Scale("plain").forward([-3.0]) == [-3.0]
    assert np.isnan(Scale("logit").expected(np.nan, 1.0))


def test_unknown_scales_are_refused():
    with pytest.raises(CompositionError, match='scale "root" is unknown; expected plain, log or logit'):
        Scale("root")
    with pytest.raises(CompositionError, match="upper = 0, expected more than 0"):
        Scale("logit", 0.0)
