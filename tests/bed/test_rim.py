import numpy as np
import pytest

from texture.bed.rim import blend, open_boundary, rim_weight, water_distance
from texture.errors import BedError
from texture.recipe import Rim

SAND = {"composition": {"sand": 1.0}}


def rim(**settings):
    return Rim(**SAND, **settings)


def land_on_three_sides(rows=10, columns=5):
    active = np.zeros((rows, columns), dtype=bool)
    active[2:, 1:-1] = True  # open to the south
    return active


def test_weights_by_hand(target_of):
    target = target_of(land_on_three_sides())
    weight = rim_weight(target, rim(width_cells=4)).reshape(target.shape)
    column = weight[::-1, 2]
    expected = [0.5 * (1 + np.cos(np.pi * i / 4)) for i in range(4)] + [0.0] * 6
    assert column == pytest.approx(expected, abs=1e-15)
    assert column[0] == 1.0  # exactly
    assert (weight[:, [0, -1]] == 0.0).all()  # land
    linear = rim_weight(target, rim(width_cells=4, profile="linear")).reshape(target.shape)[::-1, 2]
    assert linear[:5].tolist() == [1.0, 0.75, 0.5, 0.25, 0.0]
    step = rim_weight(target, rim(width_cells=4, profile="step")).reshape(target.shape)[::-1, 2]
    assert step.tolist() == [1.0] * 4 + [0.0] * 6


def test_width_in_metres_follows_the_cell_size(target_of):
    target = target_of(land_on_three_sides(), size_m=250.0)
    weight = rim_weight(target, rim(width_m=800.0, profile="linear")).reshape(target.shape)[::-1, 2]
    # cells at 0, 250, 500 and 750 m; UTM metres are within 0.04 % of true ones near the middle of a zone
    assert weight[:5] == pytest.approx([1.0, 1 - 250 / 800, 1 - 500 / 800, 1 - 750 / 800, 0.0], abs=1e-3)
    assert weight[4] == 0.0


def test_distance_goes_around_an_island(target_of):
    active = np.ones((3, 5), dtype=bool)
    active[1:, 2] = False  # a spit from the south
    target = target_of(active)
    start = np.zeros(15, dtype=bool)
    start[10] = True  # south-west corner
    steps = water_distance(target, start, in_metres=False).reshape(3, 5)
    assert steps[2].tolist() == [0.0, 1.0, np.inf, 7.0, 8.0]
    near = water_distance(target, start, in_metres=False, limit=3.0)
    assert near[np.isfinite(near)].max() == 3.0


def test_water_behind_land_is_not_rimmed(target_of):
    active = np.ones((6, 8), dtype=bool)
    active[3, :] = False  # a closed wall: the north is open, the south is too
    target = target_of(active)
    weight = rim_weight(target, rim(sides=("north",), width_cells=2)).reshape(6, 8)
    assert (weight[0] == 1.0).all()
    assert (weight[4:] == 0.0).all()


def test_compass_sides_of_a_grid_stored_south_up(target_of):
    active = np.ones((6, 9), dtype=bool)
    target = target_of(active)
    south = open_boundary(target, ("south",)).reshape(6, 9)
    assert south[-1].all()
    assert south.sum() == 9
    both = open_boundary(target, ("south", "west")).reshape(6, 9)
    assert both[:, 0].all()
    assert both.sum() == 9 + 5
    flipped = type(target)(
        **{
            **{
                name: getattr(target, name)
                for name in ("kind", "name", "dims", "shape", "crs", "x", "y", "active", "topology")
            },
            "longitude": target.longitude.reshape(6, 9)[::-1].ravel(),
            "latitude": target.latitude.reshape(6, 9)[::-1].ravel(),
            "corners": target.corners,
        }
    )
    assert open_boundary(flipped, ("south",)).reshape(6, 9)[0].all()


def test_sides_agree_with_the_targets_own_list(target_of):
    target = target_of(land_on_three_sides())
    (opening,) = [o for o in target.openings if not o.inlet]
    assert opening.sides == ("south",)
    assert np.flatnonzero(open_boundary(target, ("south",))).tolist() == sorted(opening.cells.tolist())


def test_corner_has_the_larger_of_both_weights(target_of):
    target = target_of(np.ones((12, 12), dtype=bool))
    weight = rim_weight(target, rim(sides=("north", "west"), width_cells=4)).reshape(12, 12)
    assert weight[0, 0] == 1.0
    assert weight[2, 2] == weight[2, 6] == weight[6, 2]


def test_river_inlets_are_not_rimmed(target_of):
    active = np.zeros((12, 30), dtype=bool)
    active[4:, :] = True
    active[:4, 10] = True  # a river one cell wide from the north
    weight = rim_weight(target_of(active), rim(width_cells=2)).reshape(12, 30)
    assert (weight[:4, 10] == 0.0).all()
    assert (weight[-1] == 1.0).all()


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        (
            {"width_cells": 8},
            "rim: a width of 8 cells covers all water that the sea reaches in little grid; make it narrower",
        ),
        ({"width_m": 5000.0}, "rim: a width of 5000 m covers all water"),
        ({"width_cells": 1, "sides": ("north",)}, "the north side of little grid has no open water; open sides: south"),
    ],
)
def test_a_rim_that_does_not_fit(target_of, settings, message):
    with pytest.raises(BedError, match=message):
        rim_weight(target_of(land_on_three_sides()), rim(**settings))


def test_a_pond_is_no_room_for_the_rim_to_fade(target_of):
    active = land_on_three_sides()
    active[0, 2] = False
    pond = np.pad(active, ((3, 0), (0, 0)))
    pond[1, 2] = True
    with pytest.raises(BedError, match="covers all water that the sea reaches"):
        rim_weight(target_of(pond), rim(width_cells=8))


def test_a_lake_has_no_rim(target_of):
    active = np.zeros((5, 5), dtype=bool)
    active[1:-1, 1:-1] = True
    with pytest.raises(BedError, match="has no open boundary"):
        rim_weight(target_of(active), rim(width_cells=1))


def test_blend_keeps_sums_and_ends():
    fraction = np.array([[[0.7, 0.7, 0.7]], [[0.3, 0.3, 0.3]]])
    mixed = blend(fraction, np.array([0.0, 0.5, 1.0]), np.array([0.0, 1.0]))
    assert mixed[0, 0].tolist() == [0.7, 0.35, 0.0]
    assert mixed.sum(axis=0) == pytest.approx(np.ones((1, 3)), abs=1e-15)


def test_a_rim_from_drawn_cells(target_of):
    target = target_of(np.ones((6, 7)))
    start = np.zeros(target.n_cells, dtype=bool)
    start[[2 * 7 + 3]] = True
    weight = rim_weight(
        target, Rim(sides="edge.geojson", width_cells=2, profile="linear", classes={"sand": 1.0}), start
    )
    weight = weight.reshape(6, 7)
    assert weight[2, 3] == 1.0
    assert weight[[1, 3, 2, 2], [3, 3, 2, 4]].tolist() == [0.5] * 4
    assert weight.sum() == 3.0
    with pytest.raises(BedError, match=r"rim.sides is a file \(edge.geojson\); its cells have to be given"):
        rim_weight(target, Rim(sides="edge.geojson", width_cells=2, classes={"sand": 1.0}))


@pytest.mark.parametrize("sides", ["nort", ["north", "eas"]])
def test_sides_that_are_none(sides):
    with pytest.raises(ValueError, match=r'expected "open", a list of compass sides such as'):
        Rim(sides=sides, width_cells=2, classes={"sand": 1.0})


@pytest.mark.parametrize("in_metres", [False, True])
def test_distances_agree_with_a_graph_library(target_of, in_metres):
    """Outside check: shortest paths by scipy's Dijkstra, around islands and over unequal steps."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import dijkstra

    rng = np.random.default_rng(8)
    target = target_of(rng.random((25, 30)) > 0.25)
    start = target.active & (rng.random(target.n_cells) < 0.01)
    wet = target.active[target.edges].all(axis=1)
    a, b = target.edges[wet].T
    length = target.distance_m(target.edges[wet]) if in_metres else np.ones(a.size)
    graph = csr_array((length, (a, b)), shape=(target.n_cells, target.n_cells))
    expected = dijkstra(graph, directed=False, indices=np.flatnonzero(start), min_only=True)
    found = water_distance(target, start, in_metres)
    np.testing.assert_allclose(found, expected, rtol=1e-12)
    limited = water_distance(target, start, in_metres, limit=float(np.median(expected[np.isfinite(expected)])))
    assert (limited[np.isfinite(limited)] == found[np.isfinite(limited)]).all()
    assert (np.isfinite(limited) == (found <= np.median(expected[np.isfinite(expected)]))).all()


def test_openings_are_struck_out_by_their_number(target_of):
    active = np.zeros((8, 9), dtype=bool)
    active[1:, 1:-1] = True
    active[-1, 4] = False  # two openings to the south, of three cells each
    target = target_of(active, inlet_width_m=0.0)
    assert len(target.openings) == 2
    both, one = rim_weight(target, rim(width_cells=2)), rim_weight(target, rim(width_cells=2, leave_out=(1,)))
    assert set(np.flatnonzero(both == 1.0)) == set(target.openings[0].cells) | set(target.openings[1].cells)
    assert set(np.flatnonzero(one == 1.0)) == set(target.openings[1].cells)
    with pytest.raises(BedError, match=r"has no opening 3; it has 1, south: 3 cells"):
        rim_weight(target, rim(width_cells=2, leave_out=(3,)))
