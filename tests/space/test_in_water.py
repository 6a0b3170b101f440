"""Ways through water and their layout: open water, a wall by hand, what a peninsula does to kriging."""

from __future__ import annotations

import numpy as np
import pytest

from texture.predict import Kriging
from texture.space import Space
from texture.space.in_water import Apart, InWater
from texture.space.lattice import Lattice
from texture.space.paths import STEPS, largest_water, water_graph, ways_from
from texture.space.scaling import Scaling, stress
from texture.structure import Covariance

SQUARE = np.array([[0.0, 0.0], [10_000.0, 10_000.0]])


def test_ways_in_open_water_are_straight_within_one_percent():
    lattice = Lattice.covering(SQUARE, 200.0)
    graph = water_graph(np.ones(lattice.shape, dtype=bool), lattice.step_m)
    assert 2 * len(STEPS) >= 32
    middle = lattice.count // 2
    ways = ways_from(graph, np.array([middle]))[0]
    straight = np.linalg.norm(lattice.nodes - lattice.nodes[middle], axis=1)
    far = straight > 0
    assert (ways[far] >= straight[far] * (1 - 1e-12)).all()
    assert (ways[far] / straight[far]).max() < 1.008


def test_the_way_around_a_wall_is_the_one_worked_out_by_hand():
    # A wall of one node's width at column 5, rows 0 to 6; from (row 3, column 1) to (row 3, column 9).
    wet = np.ones((12, 11), dtype=bool)
    wet[:7, 5] = False
    graph = water_graph(wet, 1.0)
    way = ways_from(graph, np.array([3 * 11 + 1]))[0, 3 * 11 + 9]
    # No corner is cut. The shortest chain of free steps goes 3 rows and 2 columns to (6, 3), then 1 row and 2 columns to (7, 5)
    # just past the wall's end, and back likewise. Cutting the corner it would be 2 · 3.5 √2 + 1 = 10.9.
    assert way == pytest.approx(2.0 * (np.sqrt(13.0) + np.sqrt(5.0)))
    wet[:, 5] = False
    graph = water_graph(wet, 1.0)
    assert np.isinf(ways_from(graph, np.array([3 * 11 + 1]))[0, 3 * 11 + 9])
    assert largest_water(graph, wet).sum() == 12 * 5


def test_a_way_slips_through_no_corner():
    wet = np.array([[True, False], [False, True]])
    assert np.isinf(ways_from(water_graph(wet, 1.0), np.array([0]))[0, 3])


def test_flat_distances_come_back_and_a_sphere_has_none():
    rng = np.random.default_rng(3)
    points = rng.normal(size=(30, 3))
    distance = np.linalg.norm(points[:, None] - points, axis=2)
    scaling = Scaling.of(distance[:20, :20], 4)
    assert scaling.dimensions == 3  # the fourth eigenvalue is nothing
    laid = scaling.place(distance[:, :20])
    assert stress(distance, np.linalg.norm(laid[:, None] - laid, axis=2)) < 1e-9
    circle = np.abs(np.subtract.outer(np.arange(12), np.arange(12)))
    circle = np.minimum(circle, 12 - circle).astype(float)
    assert Scaling.of(circle, 4).eigenvalues.min() < -0.1


def open_water() -> InWater:
    lattice = Lattice.covering(SQUARE, 250.0)
    found = InWater.lay_out(lattice, np.ones(lattice.count, dtype=bool), SQUARE)
    assert isinstance(found, InWater)
    return found


def test_open_water_is_the_plane():
    found = open_water()
    assert found.dimensions == 2
    assert found.stress < 0.006
    assert found.detour == pytest.approx(1.0, abs=0.006)
    rng = np.random.default_rng(1)
    a, b = rng.uniform(0, 10_000, (2, 300, 2))
    far = np.linalg.norm(a - b, axis=1)
    assert np.abs(np.linalg.norm(found.at(a) - found.at(b), axis=1) / far - 1).max() < 0.02


def test_a_place_off_the_water_is_put_there_and_its_way_added():
    found = open_water()
    ashore, nearest = np.array([[-1_100.0, 5_000.0]]), np.array([[-500.0, 5_000.0]])
    inside = np.array([[8_000.0, 5_000.0]])
    away = np.linalg.norm(found.at(ashore) - found.at(inside), axis=1)
    assert away[0] == pytest.approx(8_500.0 + 600.0, rel=0.03)
    assert np.linalg.norm(found.at(nearest) - found.at(inside)) == pytest.approx(8_500.0, rel=0.01)


def peninsula() -> tuple[Lattice, np.ndarray]:
    """A bay cut in two by a spit of land that reaches from the south nearly to the north."""
    lattice = Lattice.covering(SQUARE, 200.0)
    x, y = lattice.nodes.T
    return lattice, ~((np.abs(x - 5_000.0) < 350.0) & (y < 8_000.0))


def test_water_in_two_parts_is_told_apart():
    lattice, wet = peninsula()
    wet[np.abs(lattice.nodes[:, 0] - 5_000.0) < 350.0] = False
    found = InWater.lay_out(lattice, wet, np.array([[1_000.0, 1_000.0], [1_000.0, 4_000.0], [9_000.0, 1_000.0]]))
    assert isinstance(found, Apart)
    assert (found.places, found.of) in {(1, 3), (2, 3)}


def test_kriging_in_water_does_not_leak_through_a_spit():
    """The truth differs on both sides of the spit; in the plane stations across it are the nearest."""
    lattice, wet = peninsula()
    rng = np.random.default_rng(7)
    nodes = lattice.nodes[wet]
    way = ways_from(water_graph(wet.reshape(lattice.shape), lattice.step_m), np.flatnonzero(wet)[:1])[0][wet]
    value = np.sin(way / 5_000.0) * 2.0  # a field along the water: smooth by boat, broken across land
    order = rng.permutation(len(nodes))
    stations, cells = order[:60], order[60:1500]
    found = InWater.lay_out(lattice, wet, nodes)
    assert isinstance(found, InWater)
    assert found.dimensions > 2
    assert found.stress < found.stress_by_dimension[1]
    rmse = []
    for see in (lambda p: p, found.at):
        covariance = Covariance.fit(see(nodes[stations]), value[stations])
        kriging = Kriging(covariance).fit(see(nodes[stations]), value[stations])
        mean = kriging.predict(see(nodes[cells]))[0][:, 0]
        rmse.append(float(np.sqrt(np.mean((mean - value[cells]) ** 2))))
    assert rmse[1] < 0.6 * rmse[0], rmse


def test_a_pond_beside_the_water_is_told_apart_and_takes_the_nearest_place():
    """A bay with a pond in the land east of it: under a tenth of the cells, so that the bay is laid out as if it were not there."""
    lattice = Lattice.covering(SQUARE, 250.0)
    x, y = lattice.nodes.T
    bay, pond = x < 7_000.0, (x > 9_000.0) & (y < 1_500.0)
    found = InWater.lay_out(lattice, bay | pond, lattice.nodes[bay | pond])
    assert isinstance(found, InWater)
    np.testing.assert_array_equal(found.apart(lattice.nodes[bay | pond]), pond[bay | pond])
    edge = x[bay].max()
    np.testing.assert_allclose(
        found.at(np.array([[9_500.0, 1_000.0]])), found.at(np.array([[edge, 1_000.0]])), atol=130.0
    )
    assert not found.apart(np.array([[edge + 700.0, 5_000.0]])).any()  # within three steps
    most = InWater.lay_out(lattice, bay | pond, lattice.nodes[pond])
    assert isinstance(most, Apart)
    seen = Space(ground=found).at(np.array([[1_000.0, 1_000.0], [9_500.0, 1_000.0]]))
    assert seen.missing.tolist() == [False, True]
