import numpy as np
import pytest
from scipy.optimize import approx_fprime
from scipy.stats import multivariate_normal

from texture.errors import StructureError
from texture.structure import Covariance, CovarianceSet, Structure
from texture.structure.likelihood import DenseLikelihood, Family, Parameters

TRUTH = Covariance([Structure("exponential", 1.0, 6000.0)], small_scale=0.2)


def field(covariance, n, seed, extent=20_000.0, columns=1):
    rng = np.random.default_rng(seed)
    points = rng.random((n, 2)) * extent
    factor = np.linalg.cholesky(covariance.matrix(points) + 1e-12 * np.eye(n))
    return points, factor @ rng.normal(size=(n, columns))


def dense(seed=0, n=40):
    rng = np.random.default_rng(seed)
    points = rng.random((n, 2)) * 1000.0
    drift = np.column_stack([np.ones(n), points[:, 0] / 1000.0])
    survey = rng.integers(0, 3, n)
    return points, rng.normal(size=n), rng.random(n) * 0.2, drift, survey


def test_likelihood_is_that_of_the_error_contrasts():
    # Restricted likelihood = density of contrasts that the drift does not reach (Patterson & Thompson 1971), here
    # with an orthonormal basis, so that it differs by half the log-determinant of F'F alone.
    points, z, noise, drift, survey = dense()
    loss, _ = DenseLikelihood(points, z, noise, drift, survey)(Family("exponential"), Parameters(400.0, 1.3, 0.2, 0.4))
    k = Covariance([Structure("exponential", 1.3, 400.0)]).matrix(points)
    k += np.diag(noise + 0.2) + 0.4 * (survey[:, None] == survey[None, :])
    basis = np.linalg.svd(drift)[0][:, 2:]
    density = multivariate_normal(np.zeros(38), basis.T @ k @ basis).logpdf(basis.T @ z)
    assert -loss == pytest.approx(density - 0.5 * np.linalg.slogdet(drift.T @ drift)[1], abs=1e-9)


@pytest.mark.parametrize("family", [Family("exponential"), Family("matern", 1.5), Family("spherical")])
def test_gradient_is_the_slope(family):
    points, z, noise, drift, survey = dense(1)
    likelihood = DenseLikelihood(points, z, noise, drift, survey)
    theta = np.log([420.0, 1.3, 0.2, 0.4])

    def loss(t):
        return likelihood(family, Parameters(*np.exp(t)))[0]

    by_difference = approx_fprime(theta, loss, 1e-6)
    assert likelihood(family, Parameters(*np.exp(theta)))[1] == pytest.approx(by_difference, abs=2e-4)


def test_one_column_gives_a_covariance_and_two_a_set():
    points, z = field(TRUTH, 120, 3, columns=2)
    assert isinstance(Covariance.fit(points, z[:, 0]), Covariance)
    fitted = Covariance.fit(points, z)
    assert isinstance(fitted, CovarianceSet)
    assert fitted[0] == Covariance.fit(points, z[:, 0])


def test_fit_is_the_same_again_in_any_order_and_in_other_units():
    points, z = field(TRUTH, 150, 5)
    z = z[:, 0]
    fitted = Covariance.fit(points, z)
    assert Covariance.fit(points, z) == fitted
    turned = Covariance.fit(points[::-1], z[::-1])
    assert turned.structures[0].range_m == pytest.approx(fitted.structures[0].range_m, rel=2e-3)
    scaled = Covariance.fit(points, 100.0 * z + 7.0)
    assert scaled.sill == pytest.approx(1e4 * fitted.sill, rel=1e-3)
    assert scaled.structures[0].range_m == pytest.approx(fitted.structures[0].range_m, rel=1e-3)
    for value in (fitted.small_scale, fitted.structures[0].sill, fitted.structures[0].range_m):
        assert value == float(f"{value:.6g}")


def test_columns_keep_their_own_stations_and_their_correlation():
    rng = np.random.default_rng(8)
    points, e = field(TRUTH, 250, 8, columns=2)
    z = np.column_stack([e[:, 0], 0.7 * e[:, 0] + np.sqrt(1 - 0.49) * e[:, 1]])
    z[rng.choice(250, 60, replace=False), 1] = np.nan
    fitted = Covariance.fit(points, z)
    assert fitted[1].fit_record.stations == 190
    # 190 pairs: the standard error of a correlation of 0.7 is 0.037.
    assert fitted.correlation[0, 1] == pytest.approx(0.7, abs=0.11)


def test_groups_share_a_range():
    points, z = field(TRUTH, 100, 9, columns=3)
    fitted = Covariance.fit(points, z, groups=[[0, 2], [1]])
    assert fitted[0].range_m == fitted[2].range_m != fitted[1].range_m
    with pytest.raises(StructureError, match="each of the columns 0 to 2 exactly once"):
        Covariance.fit(points, z, groups=[[0, 1]])


def test_warm_start_finds_the_same_optimum_with_less_work():
    points, z = field(TRUTH, 150, 11)
    cold = Covariance.fit(points, z[:, 0])
    warm = Covariance.fit(points, z[:, 0], start=cold)
    assert warm.range_m == pytest.approx(cold.range_m, rel=1e-3)
    assert warm.fit_record.evaluations < cold.fit_record.evaluations / 3


def test_known_noise_is_not_called_small_scale():
    points, z = field(Covariance([Structure("exponential", 1.0, 6000.0)], small_scale=1e-6), 300, 12)
    rng = np.random.default_rng(13)
    noise = rng.choice([0.02, 0.8], 300)
    fitted = Covariance.fit(points, z[:, 0] + rng.normal(size=300) * np.sqrt(noise), noise_variance=noise)
    blind = Covariance.fit(points, z[:, 0] + rng.normal(size=300) * np.sqrt(noise))
    assert fitted.noise == 0.0
    assert fitted.small_scale < 0.15 < 0.25 < blind.small_scale


def test_noise_only_data_have_no_structure_and_say_so():
    rng = np.random.default_rng(14)
    found = 0
    for _ in range(20):
        fitted = Covariance.fit(rng.random((80, 2)) * 1000.0, rng.normal(size=80))
        if fitted.structures:
            found += 1
        else:
            assert "no spatial structure" in fitted.fit_record.notes[0]
            assert fitted.small_scale == pytest.approx(1.0, abs=0.6)
    # About one in twenty by the threshold; four or more of twenty would happen once in sixty.
    assert found <= 3


def test_flat_data_say_so():
    fitted = Covariance.fit(np.random.default_rng(0).random((20, 2)), np.full(20, 0.3))
    assert fitted.structures == ()
    assert "all values are equal" in str(fitted.fit_record)


def test_covariates_get_their_own_ranges():
    rng = np.random.default_rng(20)
    points = np.column_stack([rng.random((300, 2)) * 20_000.0, rng.normal(size=(300, 2))])
    # The third coordinate counts (own range 2 standard deviations), the fourth does not.
    truth = Covariance([Structure("exponential", 1.0, 15_000.0)], 0.1, axis_scales=(1.0, 1.0, 7500.0, 1.0))
    z = np.linalg.cholesky(truth.matrix(points)) @ rng.normal(size=300)
    fitted = Covariance.fit(points, z, own_range_axes=[2, 3])
    own = fitted.range_m / np.array(fitted.axis_scales)
    assert 1.0 < own[2] < 4.0
    assert own[3] > 10.0
    assert fitted.axis_scales[:2] == (1.0, 1.0)
    with pytest.raises(StructureError, match="expected some, not all, of the coordinates 0 to 3"):
        Covariance.fit(points, z, own_range_axes=[4])


def test_drift_is_taken_out_of_the_structure():
    points, z = field(TRUTH, 200, 15)
    slope = points[:, 0] / 1000.0
    with_drift = Covariance.fit(points, z[:, 0] + 3.0 * slope, drift=slope)
    without = Covariance.fit(points, z[:, 0] + 3.0 * slope)
    assert with_drift.sill < 3.0 < without.sill


def test_record_draws_and_saves():
    points, z = field(TRUTH, 60, 16)
    record = Covariance.fit(points, z[:, 0]).fit_record
    assert set(record.curves([100.0, 5000.0])) == {"likelihood", "variogram"}
    assert record.to_dict()["candidates"][0]["name"] == "no structure"
    assert record.covariance.fit_record is None
    plt = pytest.importorskip("matplotlib.figure")
    axes = plt.Figure().subplots()
    record.plot(axes)
    assert len(axes.lines) == 3


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"values": [1.0, np.nan, np.nan, 2.0]}, "column 0: found 2 stations with a value, expected at least 3"),
        ({"values": [1.0, 2.0]}, r"found shape \(2, 1\), expected \(4, v\)"),
        ({"method": "eye"}, "found 'eye', expected likelihood or variogram"),
        ({"noise_variance": [0.1, 0.1, -0.1, 0.1]}, "row 2 is negative"),
        ({"drift": [1.0, np.nan, 1.0, 1.0]}, "drift: row 1"),
    ],
)
def test_errors(arguments, message):
    given = {"points": np.eye(4), "values": [1.0, 2.0, 3.0, 4.0]} | arguments
    with pytest.raises(StructureError, match=message):
        Covariance.fit(**given)


@pytest.mark.slow
def test_parameters_are_recovered():
    # Log scale, 50 simulated fields: the mean departs from the truth by less than three standard errors.
    truth = Covariance([Structure("exponential", 1.0, 4000.0)], small_scale=0.25, survey=0.3)
    found = []
    for seed in range(50):
        rng = np.random.default_rng(1000 + seed)
        points, z = field(Covariance(truth.structures, truth.small_scale), 400, seed)
        survey = rng.integers(0, 12, 400)
        noise = rng.choice([0.05, 0.3], 400)
        z = z[:, 0] + rng.normal(size=12)[survey] * np.sqrt(0.3) + rng.normal(size=400) * np.sqrt(noise)
        c = Covariance.fit(points, z, noise_variance=noise, survey=survey)
        c = c if c.structures else None
        assert c is not None
        found.append([c.range_m, c.structures[0].sill, c.small_scale, c.survey])
    logs = np.log(np.maximum(found, 1e-4)) - np.log([4000.0, 1.0, 0.25, 0.3])
    error = logs.std(axis=0, ddof=1) / np.sqrt(50)
    assert (np.abs(logs.mean(axis=0)) < 3.0 * error).all(), (logs.mean(axis=0), error)
