import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.errors import StructureError, TextureWarning
from texture.predict import Kriging
from texture.structure import Covariance, CovarianceSet, Structure
from texture.structure.models import scale_factor


def model(name, sill, scale, nu=None, **rest):
    """Covariance from a model's own length parameter instead of its range."""
    return Covariance([Structure(name, sill, scale * scale_factor(name, nu), nu)], **rest)


# Isaaks & Srivastava (1989), chapter 12: seven samples, target (65, 137), C(h) = 10 exp(-0.3 h).
SEVEN = np.array([[61, 139], [63, 140], [64, 129], [68, 128], [71, 140], [73, 141], [75, 128]], dtype=float)
POROSITY = np.array([477.0, 696, 227, 646, 606, 791, 783])
TARGET = [[65.0, 137.0]]


def seven(covariance, **rest):
    mean, variance = Kriging(covariance, neighbours=None, **rest).fit(SEVEN, POROSITY).predict(TARGET)
    return mean[0, 0], variance[0, 0]


def test_ordinary_kriging_of_the_textbook():
    assert seven(model("exponential", 10.0, 1 / 0.3)) == pytest.approx((592.728943, 8.956053), abs=1e-5)
    # The weights are the predictions of the unit vectors.
    weights = Kriging(model("exponential", 10.0, 1 / 0.3), None).fit(SEVEN, np.eye(7)).predict(TARGET)[0][0]
    book = (0.172937, 0.317794, 0.128734, 0.086397, 0.151128, 0.057235, 0.085776)
    assert weights == pytest.approx(book, abs=1e-5)


def test_other_models_on_the_same_samples():
    # Isaaks & Srivastava (1989) vary the model on these samples; numbers recomputed by a dense solve.
    assert seven(model("exponential", 20.0, 1 / 0.3)) == pytest.approx((592.728943, 17.912106), abs=1e-5)
    nugget = model("exponential", 5.0, 1 / 0.3, small_scale=5.0)
    assert seven(nugget) == pytest.approx((596.777007, 10.305852), abs=1e-5)
    simple = seven(model("exponential", 10.0, 1 / 0.3), mean=500.0)
    assert simple == pytest.approx((549.039896, 8.579037), abs=1e-5)
    assert seven(Covariance([], small_scale=10.0)) == pytest.approx((603.714286, 11.428571), abs=1e-5)


def test_gaussian_model_without_nugget_warns_and_is_right():
    with pytest.warns(TextureWarning, match="gaussian model without small-scale variation or noise"):
        answer = seven(model("gaussian", 10.0, 10.0 / np.sqrt(3.0)))
    assert answer == pytest.approx((559.370023, 4.780597), abs=1e-5)


@pytest.mark.parametrize(("at", "mean", "variance"), [(1, 3, 4 / 3), (5, 3, 2), (10, 1, 6), (-2, 2, 4)])
def test_linear_variogram_interpolates(at, mean, variance):
    # gamma(h) = h, samples 2, 5, 1 at 0, 3, 7: linear between neighbours with variance 2ab/(a+b), constant outside
    # (common practice, no source). A spherical model of range 1e6 and sill 1e6/1.5 is linear to 1e-9 over 10 m.
    c = Covariance([Structure("spherical", 1e6 / 1.5, 1e6)])
    found = Kriging(c, None).fit([[0.0], [3.0], [7.0]], [2.0, 5.0, 1.0]).predict([[float(at)]])
    assert (found[0][0, 0], found[1][0, 0]) == pytest.approx((mean, variance), abs=1e-6)


def test_exponential_screen_in_one_dimension():
    # C = exp(-h/2), simple kriging, mean 0: weights sinh(1)/sinh(1.5), sinh(.5)/sinh(1.5), no other station counts
    # (the Markov property of the exponential model on a line; Chilès & Delfiner 2012).
    c = model("exponential", 1.0, 2.0)
    stations, values = [[0.0], [3.0], [-4.0], [9.0]], [2.0, 5.0, 77.0, -30.0]
    mean, variance = Kriging(c, None, mean=0.0).fit(stations, values).predict([[1.0]])
    assert mean[0, 0] == pytest.approx(2 * np.sinh(1) / np.sinh(1.5) + 5 * np.sinh(0.5) / np.sinh(1.5), abs=1e-12)
    assert variance[0, 0] == pytest.approx(0.575210, abs=1e-6)


@pytest.mark.parametrize("name", ["spherical", "cubic", "exponential"])
def test_corners_of_a_square_weigh_the_same(name):
    square = [[0.0, 0.0], [1.0, 0.0], [0.0, 1.0], [1.0, 1.0]]
    weights = Kriging(model(name, 1.0, 3.0)).fit(square, np.eye(4)).predict([[0.5, 0.5]])[0]
    assert weights == pytest.approx(np.full((1, 4), 0.25), abs=1e-12)


def test_pure_nugget_is_least_squares():
    # Ordinary: the mean, variance s2 (1 + 1/n). Universal: least squares, s2 (1 + x0'(X'X)^-1 x0).
    x, y = np.array([[0.0], [1], [2], [4], [7]]), np.array([1.0, 3, 2, 5, 6])
    c = Covariance([], small_scale=0.8)
    for k in (Kriging(c, None), Kriging(c, 32), Kriging(c, 32, drift="local")):
        mean, variance = k.fit(x, y, drift=x).predict([[5.0]], drift=[[5.0]])
        assert (mean[0, 0], variance[0, 0]) == pytest.approx((4.928571, 1.085714), abs=1e-6)
    mean, variance = Kriging(c).fit(x, y).predict([[5.5]])
    assert (mean[0, 0], variance[0, 0]) == pytest.approx((3.4, 0.96), abs=1e-12)


# Twelve cells of meuse.grid, ln(zinc): published models of the gstat documentation; R gstat 2.1, and PyKrige and GSTools
# agree on other cells. Columns x, y, dist, then prediction and variance.
CELLS = np.array(
    [
        [181220, 333460, 0.179213], [180860, 332900, 0.157461], [180580, 332420, 0.135709], [180220, 332100, 0.200952],
        [179900, 331820, 0.331446], [180180, 331540, 0.635828], [180340, 331260, 0.842363], [180020, 330980, 0.641243],
        [180180, 330740, 0.488829], [179140, 330500, 0.353189], [178700, 330300, 0.179216], [179260, 330100, 0.336861],
    ]
)  # fmt: skip
OK = np.array(
    [
        [5.9286336, 0.14180443], [5.7206522, 0.15606841], [6.2094439, 0.13977434], [6.2015226, 0.14913363],
        [5.1226972, 0.20875054], [5.4655707, 0.1232515], [4.9171833, 0.19785831], [5.0823726, 0.17425709],
        [5.5314965, 0.21119994], [5.5733598, 0.13748963], [6.0341218, 0.20597141], [5.2579899, 0.13368892],
    ]
)  # fmt: skip
UK = np.array(
    [
        [5.9374415, 0.13540299], [5.705768, 0.1462779], [6.2086977, 0.13394732], [6.1984149, 0.14030118],
        [5.1884252, 0.18656563], [5.4891018, 0.12228572], [4.8382111, 0.1794522], [5.0765628, 0.15995627],
        [5.5425784, 0.19183503], [5.5747145, 0.13087824], [6.0911648, 0.18641047], [5.3025202, 0.1297555],
    ]
)  # fmt: skip
KED = np.array(
    [
        [5.8859935, 0.08133551], [5.6914929, 0.08418415], [6.0779933, 0.08060604], [6.1372885, 0.08173973],
        [5.2204292, 0.0981148], [5.3436763, 0.07779413], [4.797704, 0.09748898], [5.0886383, 0.08892512],
        [5.501748, 0.10214237], [5.6352445, 0.07806289], [5.9921328, 0.09953296], [5.290995, 0.07968829],
    ]
)  # fmt: skip
NEAREST_16 = np.array(
    [
        [5.9201763, 0.14200518], [5.724821, 0.15741165], [6.228359, 0.14047612], [6.2173264, 0.15001868],
        [5.1055351, 0.21247583], [5.48845, 0.12363104], [4.7828937, 0.19989569], [5.0957239, 0.17686262],
        [5.517791, 0.21385117], [5.5903134, 0.13805517], [6.0691065, 0.20784679], [5.2697101, 0.13398008],
    ]
)  # fmt: skip
EXPONENTIAL = np.array(
    [
        [5.920272, 0.2172728], [5.7026448, 0.24154763], [6.2357483, 0.21209243], [6.2154487, 0.23262261],
        [5.1637885, 0.3335292], [5.5062909, 0.1786629], [4.8824843, 0.31143025], [5.0807798, 0.27708643],
        [5.5190658, 0.32315468], [5.5617668, 0.21123788], [6.0359675, 0.31802153], [5.2667784, 0.20003682],
    ]
)  # fmt: skip
SPHERICAL = Covariance([Structure("spherical", 0.59, 897.0)], small_scale=0.05)


def test_meuse_ordinary(meuse):
    found = Kriging(SPHERICAL, None).fit(meuse.points, meuse.log_zinc).predict(CELLS[:, :2])
    assert np.hstack(found) == pytest.approx(OK, abs=1e-5)
    found = Kriging(model("exponential", 0.6, 300.0, small_scale=0.05), None).fit(meuse.points, meuse.log_zinc)
    assert np.hstack(found.predict(CELLS[:, :2])) == pytest.approx(EXPONENTIAL, abs=1e-5)


def test_meuse_sixteen_nearest(meuse):
    found = Kriging(SPHERICAL, 16, "nearest").fit(meuse.points, meuse.log_zinc).predict(CELLS[:, :2])
    assert np.hstack(found) == pytest.approx(NEAREST_16, abs=1e-5)


def test_meuse_universal(meuse):
    c = Covariance([Structure("spherical", 0.4, 800.0)], small_scale=0.06)
    k = Kriging(c, None).fit(meuse.points, meuse.log_zinc, drift=meuse.points)
    assert np.hstack(k.predict(CELLS[:, :2], drift=CELLS[:, :2])) == pytest.approx(UK, abs=1e-5)


def test_meuse_external_drift(meuse):
    c = Covariance([Structure("spherical", 0.15, 900.0)], small_scale=0.05)
    k = Kriging(c, None).fit(meuse.points, meuse.log_zinc, drift=meuse.root_distance)
    # The grid's distances are rounded to six digits.
    assert np.hstack(k.predict(CELLS[:, :2], drift=np.sqrt(CELLS[:, 2]))) == pytest.approx(KED, abs=2e-5)


@pytest.mark.parametrize("neighbours", [None, 32])
def test_two_meanings_of_the_nugget(meuse, neighbours):
    # R gstat, samples 1, 50, 155: a nugget that is variation is honoured, a nugget that is noise ("Err") filtered.
    at = meuse.points[[0, 49, 154]]
    mean, variance = Kriging(SPHERICAL, neighbours).fit(meuse.points, meuse.log_zinc).predict(at)
    assert mean[:, 0] == pytest.approx(meuse.log_zinc[[0, 49, 154]], abs=1e-12)
    assert variance[:, 0].tolist() == [0.0, 0.0, 0.0]
    noisy = Covariance(SPHERICAL.structures, noise=0.05)
    k = Kriging(noisy, None).fit(meuse.points, meuse.log_zinc)
    mean, variance = k.predict(at)
    assert mean[:, 0] == pytest.approx([6.8849841, 5.7368892, 5.9656442], abs=1e-6)
    assert variance[:, 0] == pytest.approx([0.0361126, 0.0344342, 0.0453854], abs=1e-6)
    assert k.sample_variance(at)[:, 0] == pytest.approx(variance[:, 0] + 0.05, abs=1e-12)
    # Away from stations predictions agree and variances differ by the nugget.
    cells = CELLS[:, :2]
    plain = Kriging(SPHERICAL, None).fit(meuse.points, meuse.log_zinc).predict(cells)
    filtered = k.predict(cells)
    assert filtered[0] == pytest.approx(plain[0], abs=1e-12)
    assert plain[1] - filtered[1] == pytest.approx(np.full((12, 1), 0.05), abs=1e-12)


def test_dominant_noise_is_filtered_not_interpolated():
    rng = np.random.default_rng(2)
    points = rng.random((2000, 2)) * 1000.0
    smooth = np.sin(points[:, 0] / 150.0) + np.cos(points[:, 1] / 150.0)
    z = smooth + 3.0 * rng.normal(size=2000)
    k = Kriging(Covariance([Structure("matern", 1.0, 500.0, 1.5)], noise=9.0), 64).fit(points, z)
    mean, variance = k.predict(points)
    error = mean[:, 0] - smooth
    assert error.std() < 0.6  # the data themselves are wrong by 3
    assert np.mean(np.abs(error) < 1.645 * np.sqrt(variance[:, 0])) > 0.85


@settings(max_examples=15, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(-1e4, 1e4), st.floats(0.01, 100.0))
def test_shifts_scales_and_turns(seed, shift, factor):
    rng = np.random.default_rng(seed)
    points, z, cells = rng.random((60, 2)) * 1000.0, rng.normal(size=60), rng.random((7, 2)) * 1000.0
    c = Covariance([Structure("exponential", 1.0, 600.0)], small_scale=0.1)
    mean, variance = Kriging(c, None).fit(points, z).predict(cells)
    moved, same = Kriging(c, None).fit(points, z + shift).predict(cells)
    assert moved == pytest.approx(mean + shift, abs=1e-9 * max(1.0, abs(shift)))
    assert np.array_equal(same, variance)
    grown = Covariance([Structure("exponential", factor**2, 600.0)], small_scale=0.1 * factor**2)
    scaled, larger = Kriging(grown, None).fit(points, z * factor).predict(cells)
    assert scaled == pytest.approx(mean * factor, rel=1e-9, abs=1e-9 * factor)
    assert larger == pytest.approx(variance * factor**2, rel=1e-9)
    angle = rng.uniform(0.0, 2.0 * np.pi)
    turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    turned = Kriging(c, None).fit(points @ turn + 500.0, z).predict(cells @ turn + 500.0)
    assert turned[0] == pytest.approx(mean, abs=1e-9)
    # Turning anisotropy with the data turns the field: azimuth grows clockwise, this turn is counter-clockwise.
    stretched = Covariance(c.structures, 0.1, anisotropy=(30.0, 2.0))
    with_data = Covariance(c.structures, 0.1, anisotropy=(30.0 + np.degrees(angle), 2.0))
    a = Kriging(stretched, None).fit(points, z).predict(cells)[0]
    b = Kriging(with_data, None).fit(points @ turn, z).predict(cells @ turn)[0]
    assert a == pytest.approx(b, abs=1e-9)


@pytest.mark.parametrize("neighbours", [None, 8])
def test_exact_samples_at_one_place_are_averaged(neighbours):
    points = [[0.0, 0.0], [5.0, 1.0], [5.0, 1.0], [9.0, 3.0], [2.0, 8.0]]
    c = Covariance([Structure("exponential", 1.0, 10.0)], small_scale=0.2)
    k = Kriging(c, neighbours).fit(points, [1.0, 2.0, 4.0, 0.0, 1.5])
    mean, variance = k.predict([[5.0, 1.0], [4.0, 4.0]])
    assert (mean[0, 0], variance[0, 0]) == (pytest.approx(3.0), 0.0)
    assert k.repairs_["stations"] == 1 if neighbours is None else k.repairs_["stations"] >= 1
    once = Kriging(c, None).fit([points[i] for i in (0, 1, 3, 4)], [1.0, 3.0, 0.0, 1.5]).predict([[4.0, 4.0]])
    assert (mean[1], variance[1]) == (pytest.approx(once[0][0]), pytest.approx(once[1][0]))


def test_columns_use_their_own_stations_and_models():
    rng = np.random.default_rng(7)
    points, z, cells = rng.random((90, 2)) * 100.0, rng.normal(size=(90, 3)), rng.random((20, 2)) * 100.0
    z[::3, 1] = np.nan
    models = [model("exponential", 1.0, 20.0), model("spherical", 2.0, 50.0, noise=0.3), model("matern", 1.0, 9.0, 1.5)]
    noise = rng.random((90, 3))
    mean, variance = Kriging(CovarianceSet(models), 16).fit(points, z, noise_variance=noise).predict(cells)
    for v, c in enumerate(models):
        known = np.isfinite(z[:, v])
        alone = Kriging(c, 16).fit(points[known], z[known, v], noise_variance=noise[known, v]).predict(cells)
        assert np.array_equal(mean[:, v], alone[0][:, 0])
        assert np.array_equal(variance[:, v], alone[1][:, 0])


def test_cokriging_collapses_when_models_are_proportional():
    # Wackernagel (2003): autokrigeability of the intrinsic correlation model.
    rng = np.random.default_rng(3)
    points, z, cell = rng.random((15, 2)) * 10.0, rng.normal(size=(15, 2)), np.array([[4.0, 5.0]])
    c = model("exponential", 1.0, 4.0)
    b = np.array([[2.0, 0.7], [0.7, 1.0]])
    rho, rho0 = c.matrix(points), c.matrix(points, cell)[:, 0]
    f = np.kron(np.eye(2), np.ones((15, 1)))
    bordered = np.block([[np.kron(b, rho), f], [f.T, np.zeros((2, 2))]])
    cokriged = [
        np.linalg.solve(bordered, np.concatenate([np.kron(b[:, v], rho0), np.eye(2)[v]]))[:30] @ z.T.ravel()
        for v in (0, 1)
    ]
    assert Kriging(c, None).fit(points, z).predict(cell)[0][0] == pytest.approx(cokriged, abs=1e-12)


class TestLadder:
    points = np.array([[0.0, 0.0], [10.0, 0.0], [0.0, 10.0], [10.0, 10.0], [500.0, 500.0]])
    values = np.array([1.0, 2.0, 3.0, 4.0, 9.0])
    c = Covariance([Structure("exponential", 1.0, 100.0)])

    def test_radius_and_least_number(self):
        k = Kriging(self.c, 4, radius_m=20.0, at_least=2).fit(self.points, self.values)
        cells = [[5.0, 5.0], [500.0, 500.0], [250.0, 250.0]]
        mean, _, rung = k.predict_with_support(cells)
        assert rung[:, 0].tolist() == [0, 1, 1]
        assert np.array_equal(k.support(cells), rung)
        assert mean[1, 0] == pytest.approx(9.0)
        assert np.isfinite(mean).all()

    def test_sectors_bring_in_the_far_side(self):
        rng = np.random.default_rng(0)
        crowd = np.column_stack([rng.uniform(1.0, 2.0, 40), rng.uniform(1.0, 2.0, 40)])
        points = np.vstack([crowd, [[-50.0, 1.0], [1.0, -50.0], [-50.0, -50.0]]])
        k = Kriging(self.c, 8, per_sector_at_most=2).fit(points, np.arange(43.0))
        chosen = k.stations_of([0.0, 0.0])
        assert sorted(chosen)[2:] == [40, 41, 42]
        assert len(chosen) == 5
        nearest_two = np.argsort(np.hypot(*crowd.T))[:2]
        assert set(chosen) == {40, 41, 42, *nearest_two}

    def test_too_few_stations_anywhere_give_their_mean(self):
        z = np.column_stack([self.values, [1.0, np.nan, np.nan, 3.0, np.nan]])
        k = Kriging(self.c, 4, at_least=3).fit(self.points, z)
        mean, variance, rung = k.predict_with_support([[900.0, 0.0]])
        assert rung.tolist() == [[0, 2]]
        assert mean[0, 1] == pytest.approx(2.0)
        rho = np.exp(-np.hypot(10, 10) / 100.0 * np.log(20.0))
        assert variance[0, 1] == pytest.approx(1.0 + (1.0 + rho) / 2.0)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: Kriging(None), "found NoneType, expected Covariance or CovarianceSet"),
        (lambda: Kriging(SPHERICAL, 0), "found 0, expected a whole number"),
        (lambda: Kriging(SPHERICAL, neighbourhood="ball"), "found 'ball', expected tile or nearest"),
        (lambda: Kriging(SPHERICAL, None, radius_m=5.0), "uses all stations"),
        (lambda: Kriging(SPHERICAL).predict([[0.0, 0.0]]), "call fit before predict"),
        (lambda: Kriging(SPHERICAL).fit(np.eye(4), np.ones(4)), "spherical model in 4 dimensions: it is valid in 3"),
        (
            lambda: Kriging(SPHERICAL).fit(np.eye(3), np.ones(3)).predict([[1.0, 2.0]]),
            "found 2 coordinates, expected 3",
        ),
        (lambda: Kriging(SPHERICAL).fit(np.eye(3), [1.0, 2.0]), r"values: found shape \(2, 1\), expected \(3, v\)"),
        (lambda: Kriging(SPHERICAL).fit(np.eye(3), np.full(3, np.nan)), "column 0 has no station with a value"),
        (lambda: Kriging(SPHERICAL).fit(np.eye(3), np.ones(3), noise_variance=[1, -1, 1]), "noise_variance: row 1"),
        (
            lambda: Kriging(Covariance([], 1.0, survey=1.0)).fit(np.eye(3), np.ones(3)),
            "give the survey of each station",
        ),
        (lambda: Kriging(SPHERICAL, mean=1.0).fit(np.eye(3), np.ones(3), drift=np.ones(3)), "exclude each other"),
        (
            lambda: Kriging(SPHERICAL).fit(np.eye(3), np.arange(3.0), drift=[1.0, 2.0, 3.0]).predict([[0.0, 0.0, 1.0]]),
            "the stations had 1 columns; give the same columns at the points",
        ),
        (
            lambda: Kriging(SPHERICAL).fit(np.eye(3), np.arange(3.0), drift=np.ones(3)),
            "linearly dependent",
        ),
        (lambda: Kriging(CovarianceSet([SPHERICAL])).fit(np.eye(3), np.eye(3)), "found 1, expected one for each of 3"),
        (
            lambda: Kriging(SPHERICAL, None).fit(np.random.default_rng(0).random((3001, 2)), np.ones(3001)),
            "found 3001 stations, expected at most 3000",
        ),
    ],
)
def test_errors(call, message):
    with pytest.raises(StructureError, match=message):
        call()


@pytest.mark.slow
def test_intervals_of_fitted_models_hold_what_they_say():
    """Nominal 90 % intervals of the bed hold 87 to 93 % of the true values, over 25 simulated fields with noise and survey offsets."""
    hits = []
    for seed in range(5000, 5025):
        rng = np.random.default_rng(seed)
        points = rng.uniform(0.0, 20_000.0, (500, 2))
        apart = np.linalg.norm(points[:, None] - points[None], axis=-1)
        bed = np.linalg.cholesky(np.exp(-2.9957 * apart / 4000.0) + 0.25 * np.eye(500)) @ rng.normal(size=500)
        survey, noise = rng.integers(0, 12, 400), rng.choice([0.05, 0.3], 400)
        seen = bed[:400] + rng.normal(size=12)[survey] * np.sqrt(0.3) + rng.normal(size=400) * np.sqrt(noise)
        known = {"noise_variance": noise, "survey": survey}
        fitted = Kriging(Covariance.fit(points[:400], seen, **known)).fit(points[:400], seen, **known)
        mean, variance = fitted.predict(points[400:])
        hits.append(np.mean(np.abs(mean[:, 0] - bed[400:]) < 1.645 * np.sqrt(variance[:, 0])))
    assert 0.87 < np.mean(hits) < 0.93
