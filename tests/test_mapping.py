"""From stations to a normal in the columns of a treatment: learning, methods with and without a variance, threads."""

from dataclasses import replace

import numpy as np
import pytest

from texture.composition import LogRatio
from texture.learning import learn, learn_all
from texture.mapping import make_mapper
from texture.observations import Observations
from texture.recipe import Method
from texture.scoring import Judge
from texture.structure import Covariance, CovarianceSet, Structure
from texture.structure.displacement import displacement_variance
from texture.treatments import Censor, Presence, Replace
from texture.validation.held_out import ScoreWeights

LR = LogRatio(["mud", "sand", "gravel"])
NAN = float("nan")


@pytest.fixture(scope="module")
def stations() -> Observations:
    rng = np.random.default_rng(4)
    n = 60
    points = rng.uniform(0, 10_000, (n, 2))
    mud = 1 / (1 + np.exp(-(points[:, 0] - 5_000) / 2_000 + rng.normal(0, 0.3, n)))
    gravel = np.where(points[:, 1] > 6_000, (1 - mud) * rng.uniform(0.1, 0.4, n), 0.0)
    fractions = np.column_stack([mud, 1 - mud - gravel, gravel])
    unknown = np.full((n, 3), NAN)
    return Observations(
        points, fractions, np.full(n, 0.001), unknown, unknown.copy(), np.full(n, "", dtype="<U8"), np.full(n, NAN),
        np.arange(n) % 2, np.ones(n, dtype=bool), np.arange(n), np.full(n, NAN), np.zeros(n),
        np.ones(n, dtype=np.int64), unknown.copy(),
    )  # fmt: skip


@pytest.mark.parametrize("treatment", [Replace(LR), Censor(LR), Presence(LR)])
@pytest.mark.parametrize("name", ["kriging", "inverse_distance"])
def test_fractions_sum_to_one_and_intervals_hold_the_median(stations, treatment, name):
    mapper = make_mapper(name, learn(treatment, stations, Method()), Method())
    places = np.array([[2_000.0, 2_000.0], [5_000.0, 8_000.0], [9_000.0, 5_500.0]])
    mean, variance = mapper.predict(places)
    assert mean.shape == (3, len(treatment.column_names))
    expected = mapper.expected(mean, variance)
    np.testing.assert_allclose(expected.sum(axis=1), 1.0, atol=1e-12)
    assert expected[1, 2] > 0.05 > expected[0, 2]  # gravel lies in the north
    columns = mapper.columns(places, np.zeros_like(mean))
    spread = columns.covariance(columns.sample_variance)
    low, high = treatment.sample_quantiles(mean, spread, (0.05, 0.95))
    if name == "kriging":
        assert (low <= high).all()
        assert (low[:, :2] < high[:, :2]).all()  # gravel may be surely absent
        assert (low[:, 0] < expected[:, 0]).all()
        assert (expected[:, 0] < high[:, 0]).all()
        assert low[0, 2] == 0.0  # below the limit a sample is not told from one without gravel
    else:
        assert np.isnan(low).all()
        assert not mapper.has_variance
        np.testing.assert_array_equal(expected, mapper.back(mean))


def test_controls_take_the_spread_of_their_errors(stations):
    learned = learn(Replace(LR), stations, Method())
    error = np.array([0.5, 2.0]), np.array([[1.0, 0.4], [0.4, 1.0]])
    mapper = make_mapper("nearest", learned, Method(), error)
    mean, variance = mapper.predict(np.array([[2_000.0, 2_000.0], [5_000.0, 8_000.0]]))
    np.testing.assert_array_equal(variance, [[0.5, 2.0]] * 2)
    assert mapper.covariance(variance)[0, 0, 1] == pytest.approx(0.4)
    low, _, high = mapper.cell_quantiles(mean, variance, (0.05, 0.5, 0.95))
    assert (low < high).all()
    np.testing.assert_array_equal(mapper.expected(mean, variance), mapper.back(mean))


def test_calibration_moves_no_prediction(stations):
    learned = learn(Replace(LR), stations, Method())
    places = np.array([[2_000.0, 2_000.0], [5_000.0, 8_000.0]])
    mean, variance = make_mapper("kriging", learned, Method()).predict(places)
    again, wider = make_mapper("kriging", learned.calibrated(np.array([2.0, 0.5])), Method()).predict(places)
    np.testing.assert_allclose(again, mean, atol=1e-9)
    np.testing.assert_allclose(wider, variance * [2.0, 0.5], rtol=1e-9)


def test_covariance_follows_the_residual_correlation(stations):
    one = Covariance([Structure("exponential", 1.0, 3_000.0)])
    learned = learn(Replace(LR), stations, Method())
    mapper = make_mapper("kriging", learned, Method())
    object.__setattr__(mapper, "structure", CovarianceSet([one, one], [[1.0, -0.5], [-0.5, 1.0]]))
    np.testing.assert_allclose(mapper.covariance(np.array([[4.0, 1.0]])), [[[4.0, -1.0], [-1.0, 1.0]]])


def test_threads_change_nothing(stations):
    tasks = [(t, stations, None) for t in (Replace(LR), Censor(LR), Presence(LR))]
    together = learn_all(tasks, Method())
    for (treatment, o, _), learned in zip(tasks, together, strict=True):
        alone = learn(treatment, o, Method())
        assert alone.structure == learned.structure
        np.testing.assert_array_equal(alone.values, learned.values)
        np.testing.assert_array_equal(alone.noise, learned.noise)


def test_censored_values_end_below_their_bound_where_the_neighbours_agree(stations):
    treatment = Censor(LR)
    learned = learn(treatment, stations, Method())
    plain = treatment.columns(stations)[0]
    low, high = treatment.bounds(stations)
    zero = low[:, 1] < high[:, 1]
    assert zero.sum() > 20
    kept = zero & np.isfinite(learned.values[:, 1])
    assert (learned.values[kept, 1] != plain[kept, 1]).all()
    assert (learned.noise[kept, 1] > 0.0).all()
    np.testing.assert_array_equal(learned.values[~zero, 1], plain[~zero, 1])  # known values stay
    # Deep among zeros the posterior lies below the bound: the map has less gravel than the limit.
    mapper = make_mapper("kriging", learned, Method())
    expected = mapper.expected(*mapper.predict(np.array([[2_000.0, 1_500.0]])))
    assert expected[0, 2] < LR.detection_limit


def test_no_survey_is_given_where_there_is_but_one(stations):
    one = stations.take(np.flatnonzero(stations.survey == 0))
    assert learn(Replace(LR), one, Method()).survey is None
    assert learn(Replace(LR), stations, Method()).survey is not None


def test_a_badly_known_place_weighs_less_and_widens_its_own_interval(stations):
    """The same stations, ten of them known to ± 2 km: their weight goes to the others, and the small-scale variation is not theirs."""
    rough = replace(stations, accuracy_m=np.where(np.arange(60) < 10, 2_000.0, 3.0))
    exact, learned = (learn(Replace(LR), o, Method()) for o in (stations, rough))
    assert (exact.noise[:10, 0] < 0.1).all()
    expected = displacement_variance(learn(Replace(LR), stations, Method()).structure[0], [2_000.0])[0]
    np.testing.assert_allclose(learned.noise[:10, 0] - exact.noise[:10, 0], expected, rtol=1e-9)
    np.testing.assert_array_equal(learned.noise[10:, 0], exact.noise[10:, 0])
    at = stations.points[:10]
    moved = [
        np.abs(make_mapper("kriging", o, Method()).predict(at)[0][:, 0] - o.values[:10, 0]).mean()
        for o in (exact, learned)
    ]
    assert moved[1] > 2.0 * moved[0] + 0.01
    inside = learn(Replace(LR), rough, Method(), start=learned.structure)  # as in a fold: from the structure of all
    assert (inside.noise[:10, 0] > 0.1).all()
    assert (learned.sample_noise[:10, 0] > exact.sample_noise[:10, 0]).all()


def test_an_average_and_forest_kriging_take_the_neighbours_of_the_recipe(stations):
    learned, method = learn(Replace(LR), stations, Method()), Method(neighbours=5)
    assert make_mapper("forest_kriging", learned, method).predictor.neighbours == 5
    weights = {"nearest": 0.5, "kriging": 0.5}
    spreads = {"nearest": np.ones(2)}
    average = make_mapper("average", learned, method, weights=weights, spreads=spreads).predictor
    assert average.members[1].neighbours == 5


def test_what_is_scored_is_what_is_mapped(stations):
    """A map of medians is scored as medians: the prediction is the plain back-transform, whatever the variance."""
    learned = learn(Replace(LR), stations, Method())
    columns = make_mapper("kriging", learned, Method()).columns(stations.points + 300.0, learned.sample_noise)
    n = stations.count
    weights = ScoreWeights(np.ones(n), np.empty((0, n)))
    mean, median = (
        Judge(LR.parts, stations.fractions, np.arange(n) % 4, weights, 0.005, asked)
        .judge("kriging", learned, columns, True)
        .held_out.predicted
        for asked in (False, True)
    )
    np.testing.assert_array_equal(median, LR.inverse(columns.mean))
    assert np.abs(mean - median).max() > 0.01


def test_the_seed_of_the_recipe_reaches_forests_and_their_variance_is_that_of_a_sample(stations):
    learned, method = learn(Replace(LR), stations, Method()), Method()
    forests = [make_mapper("forest", learned, method, seed=seed) for seed in (1, 1, 2)]
    places = stations.points[:20] + 300.0
    means = [forest.predict(places)[0] for forest in forests]
    np.testing.assert_array_equal(means[0], means[1])
    assert (means[0] != means[2]).any()
    assert make_mapper("forest_kriging", learned, method, seed=7).predictor.forest.seed == 7
    own = np.full((20, 2), 0.3) + np.array([c.noise + c.survey for c in learned.structure])
    for name, expected in (("forest", np.maximum), ("kriging", np.add)):
        columns = make_mapper(name, learned, method, seed=1).columns(places, np.full((20, 2), 0.3))
        np.testing.assert_allclose(columns.sample_variance, expected(columns.variance, own), rtol=1e-12)
