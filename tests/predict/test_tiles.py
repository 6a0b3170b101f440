import numba
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial import cKDTree

from texture.predict import Kriging
from texture.predict.neighbours import build_tree, make_search, nearest
from texture.predict.tiles import build_tiles
from texture.structure import Covariance, CovarianceSet, Structure

PAIR = CovarianceSet(
    [
        Covariance([Structure("exponential", 1.0, 300.0)], small_scale=0.1, noise=0.1),
        Covariance([Structure("matern", 1.0, 200.0, 1.5)], small_scale=0.2),
    ]
)


def kriged(n=600, seed=0, covariance=PAIR, neighbours=16):
    rng = np.random.default_rng(seed)
    points, values = rng.random((n, 2)) * 1000.0, rng.normal(size=(n, 2))
    values[rng.random(n) < 0.2, 1] = np.nan
    return Kriging(covariance, neighbours).fit(points, values)


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 5), st.integers(1, 300), st.booleans())
def test_the_tree_finds_what_scipy_finds(seed, d, n, lattice):
    rng = np.random.default_rng(seed)
    points = rng.integers(0, 4, (n, d)).astype(float) if lattice else rng.normal(size=(n, d))
    tree = build_tree(points, 8)
    k = min(n, 12)
    search = make_search(tree, k)
    for place in rng.normal(size=(5, d)):
        expected = np.atleast_1d(cKDTree(points).query(place, k)[0])
        assert nearest(tree, place, k, np.inf, search) == k
        assert np.sqrt(np.sort(search.heap)) == pytest.approx(expected, abs=1e-12)
        assert len(set(search.index.tolist())) == k
        within = nearest(tree, place, k, expected[k // 2] ** 2 * (1 + 1e-12), search)
        assert within == min(k, int((np.linalg.norm(points - place, axis=1) <= expected[k // 2] * (1 + 1e-12)).sum()))


def test_the_same_bits_alone_and_in_any_batch():
    k = kriged()
    cells = np.random.default_rng(1).random((20_000, 2)) * 1600.0 - 300.0
    mean, variance = k.predict(cells)
    ten = k.predict(cells[500:510])
    assert np.array_equal(ten[0], mean[500:510])
    assert np.array_equal(ten[1], variance[500:510])
    for i in (0, 77, 19_999):
        alone = k.predict(cells[i : i + 1])
        assert np.array_equal(alone[0][0], mean[i])
        assert np.array_equal(alone[1][0], variance[i])
    backwards = k.predict(cells[::-1])
    assert np.array_equal(backwards[0][::-1], mean)


@pytest.mark.slow
def test_the_same_bits_alone_in_ten_and_in_a_million_on_one_and_two_threads():
    k = kriged(3000, neighbours=32)
    cells = np.random.default_rng(2).random((1_000_000, 2)) * 1600.0 - 300.0
    threads = numba.get_num_threads()
    try:
        numba.set_num_threads(1)
        mean, variance = k.predict(cells)
        if threads > 1:
            numba.set_num_threads(2)
        again = k.predict(cells)
    finally:
        numba.set_num_threads(threads)
    assert np.array_equal(again[0], mean)
    assert np.array_equal(again[1], variance)
    for first in np.random.default_rng(3).integers(0, 999_990, 20):
        for count in (1, 10):
            part = slice(first, first + count)
            few = k.predict(cells[part])
            assert np.array_equal(few[0], mean[part])
            assert np.array_equal(few[1], variance[part])


@pytest.mark.parametrize(("neighbours", "mode"), [(16, "tile"), (16, "nearest"), (None, "tile")])
def test_threads_change_nothing(neighbours, mode):
    rng = np.random.default_rng(3)
    points, values = rng.random((300, 2)) * 1000.0, rng.normal(size=(300, 2))
    k = Kriging(PAIR, neighbours, mode).fit(points, values)
    cells = rng.random((5000, 2)) * 1000.0
    many = k.predict(cells)
    threads = numba.get_num_threads()
    numba.set_num_threads(1)
    try:
        one = k.predict(cells)
    finally:
        numba.set_num_threads(threads)
    assert np.array_equal(many[0], one[0])
    assert np.array_equal(many[1], one[1])


def layouts():
    rng = np.random.default_rng(5)
    lattice = np.stack(np.meshgrid(np.arange(60.0), np.arange(60.0)), -1).reshape(-1, 2) * 10.0
    gap = lattice[np.abs(lattice - 300.0).max(axis=1) > 150.0]
    transects = np.column_stack([np.repeat(np.arange(10) * 100.0, 200), np.tile(np.arange(200) * 5.0, 10)])
    clusters = rng.random((20, 2))[rng.integers(0, 20, 3000)] * 1000.0 + rng.normal(size=(3000, 2)) * 8.0
    repeats = np.repeat(rng.random((40, 2)) * 1000.0, 50, axis=0)
    return {
        "uniform": rng.random((3000, 2)) * 1000.0,
        "gap": gap,
        "transects": transects,
        "clusters": clusters,
        "repeats": repeats,
    }


@pytest.mark.parametrize("name", list(layouts()))
def test_tiles_stay_small_and_hold_the_nearest_stations(name):
    points = layouts()[name]
    tiles = build_tiles(points, 16)
    # Neither a gap beside dense data nor fifty samples at one place may multiply tiles or neighbourhoods.
    assert len(tiles) < 2.5 * len(points)
    rng = np.random.default_rng(6)
    cells = points.min(axis=0) + rng.random((300, 2)) * np.ptp(points, axis=0)
    tree = cKDTree(points)
    missing = []
    begin, tile, weight = tiles.serving(cells)
    for i, cell in enumerate(cells):
        first = tile[begin[i] : begin[i + 1]][np.argmax(weight[begin[i] : begin[i + 1]])]
        own = tiles.stations(first)
        assert len(own) == len(set(own.tolist())) <= 11 * 16 + 3 * 32
        nearest_four = tree.query(cell, 4)[0]
        reached = np.sort(np.linalg.norm(points[own] - cell, axis=1))[:4]
        missing.append(np.any(reached > nearest_four + 1e-9))
    # Of a cell's four nearest stations seldom one is not in its tile's set.
    assert np.mean(missing) < 0.03


def expected_distance(points, cells, mode):
    """Rms distance from the all-station answer in kriging standard deviations, expected over fields of the model.

    The all-station answer is the best linear one, so the expected square is what the local variance has more.
    """
    c = Covariance([Structure("exponential", 1.0, 400.0)], small_scale=0.05, noise=0.05)
    z = np.zeros(len(points))
    wide = Kriging(c, None).fit(points, z).predict(cells)[1]
    local = Kriging(c, 32, mode).fit(points, z).predict(cells)[1]
    return np.sqrt(np.mean((local - wide) / wide))


@pytest.mark.slow
@pytest.mark.parametrize(("name", "most"), [("uniform", 0.01), ("gap", 0.04), ("transects", 0.05), ("clusters", 0.08)])
def test_close_to_the_answer_of_all_stations(name, most):
    # Cells anywhere, in the gaps too; what 0.03 kriging standard deviations would be beside stations is not
    # reached between clusters, where any 100 stations know less of the mean than all do.
    points = layouts()[name][:2900]
    cells = points.min(axis=0) + np.random.default_rng(7).random((200, 2)) * np.ptp(points, axis=0)
    tile = expected_distance(points, cells, "tile")
    assert tile < most
    assert tile < 0.5 * expected_distance(points, cells, "nearest")


@pytest.mark.parametrize("name", ["uniform", "gap", "transects", "clusters"])
def test_where_stations_are_as_dense_as_cells(name):
    # One station in ten held out and predicted: within 0.03 kriging standard deviations of the all-station answer.
    points = layouts()[name][:2900]
    held = np.random.default_rng(8).random(len(points)) < 0.1
    assert expected_distance(points[~held], points[held], "tile") < 0.03


def test_far_away_the_mean_and_the_full_variance():
    k = kriged()
    mean, variance = k.predict([[1e7, 1e7], [-3e6, 500.0]])
    assert np.isfinite(mean).all()
    assert (variance > [PAIR[0].sill, PAIR[1].sill]).all()
    assert (variance < [1.5 * PAIR[0].sill, 1.5 * PAIR[1].sill]).all()


@pytest.mark.parametrize("n", [1, 2, 3, 9])
def test_a_handful_of_stations_will_do(n):
    rng = np.random.default_rng(n)
    points, z, cells = rng.random((n, 2)), rng.normal(size=n), rng.random((5, 2))
    c = Covariance([Structure("spherical", 1.0, 1.0)])
    tile, full = Kriging(c).fit(points, z).predict(cells), Kriging(c, None).fit(points, z).predict(cells)
    assert tile[0] == pytest.approx(full[0], abs=1e-12)
    assert tile[1] == pytest.approx(full[1], abs=1e-12)
