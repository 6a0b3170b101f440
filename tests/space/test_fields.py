"""Values between places: bilinear, nodata, nearest within one cell."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.errors import StructureError, TargetError
from texture.space import Covariates, Grid, Layer, Scatter, Space
from texture.space.fields import BESIDE, BETWEEN, MISSING

AXIS = np.array([0.0, 100.0, 200.0])


@given(st.floats(-1.0, 1.0), st.floats(-1.0, 1.0), st.floats(0.0, 200.0), st.floats(0.0, 200.0))
def test_bilinear_holds_a_plane_whichever_way_the_axes_run(a, b, x, y):
    x_axis, y_axis = AXIS[::-1], np.array([0.0, 50.0, 200.0])
    values = a * x_axis[None] + b * y_axis[:, None]
    found, state = Grid(x_axis, y_axis, values).at(np.array([[x, y]]))
    assert found[0] == pytest.approx(a * x + b * y, abs=1e-9)
    assert state[0] == BETWEEN


def test_missing_corners_share_their_weight_and_the_nearest_serves_within_one_cell():
    values = np.array([[1.0, np.nan, np.nan], [3.0, np.nan, np.nan], [np.nan] * 3])
    grid = Grid(AXIS, AXIS, values)
    found, state = grid.at(
        np.array([[50.0, 50.0], [0.0, 0.0], [120.0, 100.0], [-100.0, 0.0], [-101.0, 0.0], [0.0, 50.0]])
    )
    # Half-way between a corner of 1 and one of 3; at a corner; 1.2 cells off; just one cell off the grid; more than that.
    assert found.tolist() == [2.0, 1.0, 3.0, 1.0, 1.0, 2.0]
    assert state.tolist() == [BESIDE, BETWEEN, MISSING, BESIDE, MISSING, BETWEEN]


def test_scattered_values_do_not_reach_far():
    field = Scatter(np.array([[0.0, 0.0], [100.0, 0.0], [5000.0, 0.0]]), np.array([1.0, 3.0, 9.0]), np.full(3, 100.0))
    found, state = field.at(np.array([[100.0, 0.0], [50.0, 0.0], [200.0, 0.0], [800.0, 0.0]]))
    assert found[[0, 1, 3]].tolist() == [3.0, 2.0, 3.0]
    assert found[2] == 3.0  # 1 lies two cells off, and does not count
    assert state.tolist() == [BETWEEN, BETWEEN, BESIDE, MISSING]


@pytest.mark.parametrize(
    ("x", "values", "message"),
    [([0.0, 0.0, 1.0], np.ones((3, 3)), "rise or fall"), (AXIS, np.full((3, 3), np.nan), "has none")],
)
def test_a_grid_that_is_none_is_refused(x, values, message):
    with pytest.raises(TargetError, match=message):
        Grid(np.array(x), AXIS, values)


def test_covariates_are_frozen_at_the_stations_and_say_where_they_guess():
    depth = Layer("depth", Grid(AXIS, AXIS, np.tile([0.0, 10.0, 20.0], (3, 1))))
    stations = np.array([[0.0, 0.0], [100.0, 0.0], [200.0, 0.0], [900.0, 0.0]])
    frozen = Covariates([depth]).frozen_at(stations)  # the last has no value and does not count in mean and spread
    values, missing = frozen.at(stations)
    np.testing.assert_allclose(values[:3, 0], [-np.sqrt(1.5), 0.0, np.sqrt(1.5)])
    assert values[3, 0] == values[2, 0]
    assert missing.tolist() == [False, False, False, True]
    some = Space(axes=frozen).at(stations[:2])
    assert some.points.shape == (2, 3)
    drifted = Space(drift=("y", "depth"), columns=frozen).at(stations)
    np.testing.assert_allclose(drifted.drift, np.column_stack([stations[:, 1], values[:, 0]]))
    assert drifted.missing.tolist() == missing.tolist()
    assert drifted.points.shape == (4, 2)


def test_logarithms_take_what_is_negative_as_nothing():
    layer = Layer("depth", Grid(AXIS, AXIS, np.tile([-5.0, 0.0, np.e - 1.0], (3, 1))), "log")
    assert layer.at(np.array([[0.0, 0.0], [100.0, 0.0], [200.0, 0.0]]))[0].tolist() == pytest.approx([0.0, 0.0, 1.0])


def test_a_covariate_that_tells_nothing_is_refused():
    flat = Layer("slope", Grid(AXIS, AXIS, np.ones((3, 3))))
    with pytest.raises(StructureError, match='"slope": it is 1 at all stations'):
        Covariates([flat]).frozen_at(np.array([[0.0, 0.0], [50.0, 3.0], [9.0, 9.0]]))
    with pytest.raises(StructureError, match="0 of 3 stations have a value"):
        Covariates([flat]).frozen_at(np.array([[1e6, 0.0], [2e6, 3.0], [3e6, 9.0]]))
