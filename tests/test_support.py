"""Where the samples support the map when the method sees more than place."""

import numpy as np
import pytest

from texture.space import PLANE, Covariates, Grid, Layer, Space
from texture.structure import Covariance, CovarianceSet, Structure
from texture.support import find_support
from texture.validation.agreement import Agreement
from texture.validation.ensemble import DrawScores
from texture.validation.folds import make_folds
from texture.validation.held_out import HeldOut

SIDE = 10_000.0


@pytest.fixture(scope="module")
def world():
    rng = np.random.default_rng(1)
    stations = np.floor(rng.uniform(0, SIDE, (120, 2)) / 100.0) * 100.0 + 50.0
    mud = 1 / (1 + np.exp(-np.sin(stations[:, 0] / 2000.0) - np.cos(stations[:, 1] / 2500.0)))
    observed = np.column_stack([mud, 1 - mud, np.zeros(120)])
    empty = np.empty((0, 0), dtype=np.int64)
    nothing = DrawScores(*np.full((4, 120), np.nan))
    held = HeldOut("kriging", observed + np.array([0.1, -0.1, 0.0]), {}, nothing, Agreement((), empty, empty, empty))
    cells = rng.uniform(500, SIDE - 500, (2000, 2))
    return stations, observed, held, make_folds("matched", stations, 10, 1, cells), cells


def covariate(values):
    axis = (np.arange(100) + 0.5) * 100.0
    return Grid(axis, axis, values)


def test_in_the_plane_support_is_distance(world):
    stations, observed, held, folds, cells = world
    one = CovarianceSet([Covariance([Structure("exponential", 1.0, 3000.0)])] * 2)
    support = find_support(PLANE, one, stations, folds, observed, held)
    distance, unlike = support.at(cells)
    brute = np.linalg.norm(cells[:, None] - stations[None], axis=-1).min(axis=1)
    np.testing.assert_allclose(distance, brute)
    np.testing.assert_allclose(unlike, brute)
    assert support.curve.at(unlike) == pytest.approx(np.full(2000, np.sqrt(0.02 / 3)))
    assert (unlike <= support.reach_m).mean() > 0.9
    assert support.beyond_text == f"is further than {support.reach_m / 1000:.1f} km from any sample"


@pytest.mark.parametrize("as_axis", [True, False])
def test_covariate_that_equals_the_answer_at_stations_only_is_flagged(world, as_axis):
    # Everywhere else it is of another kind, so that what it taught at the stations says nothing of the map.
    stations, observed, held, folds, cells = world
    values = np.full((100, 100), 9.0)
    row, column = (stations[:, 1] // 100).astype(int), (stations[:, 0] // 100).astype(int)
    values[row, column] = observed[:, 0]
    layers = Covariates([Layer("leak", covariate(values))]).frozen_at(stations)
    space = Space(axes=layers) if as_axis else Space(drift=("leak",), columns=layers)
    scaled = Covariance([Structure("exponential", 1.0, 3000.0)], axis_scales=(1.0, 1.0, 1000.0) if as_axis else None)
    support = find_support(space, CovarianceSet([scaled] * 2), stations, folds, observed, held)
    _, unlike = support.at(cells)
    assert (unlike > support.reach_m).mean() > 0.8
    assert support.beyond_text.startswith("is less like every sample, in place and covariates, than ")
    # The same covariate where it is real everywhere flags little.
    x, y = np.meshgrid((np.arange(100) + 0.5) * 100.0, (np.arange(100) + 0.5) * 100.0)
    real = 1 / (1 + np.exp(-np.sin(x / 2000.0) - np.cos(y / 2500.0)))
    layers = Covariates([Layer("real", covariate(real))]).frozen_at(stations)
    space = Space(axes=layers) if as_axis else Space(drift=("real",), columns=layers)
    support = find_support(space, CovarianceSet([scaled] * 2), stations, folds, observed, held)
    assert (support.at(cells)[1] > support.reach_m).mean() < 0.2
