"""The kernel against PyKrige and GSTools, which share no code with it: 1e-8 in mean and variance."""

import gstools
import numpy as np
import pytest
from pykrige.ok import OrdinaryKriging
from pykrige.ok3d import OrdinaryKriging3D
from pykrige.uk import UniversalKriging

from texture.predict import Kriging
from texture.structure import Covariance, Structure

RNG = np.random.default_rng(42)
STATIONS = RNG.random((80, 2)) * 1000.0
VALUES = np.sin(STATIONS[:, 0] / 200.0) + STATIONS[:, 1] / 500.0 + 0.1 * RNG.normal(size=80)
CELLS = RNG.random((40, 2)) * 1400.0 - 200.0
NUGGETS = [0.0, 0.3, 20.0]


def both(kriging, cells=CELLS, stations=STATIONS, values=VALUES, drift=None, cell_drift=None):
    mean, variance = kriging.fit(stations, values, drift=drift).predict(cells, drift=cell_drift)
    return np.column_stack([mean[:, 0], variance[:, 0]])


def partial(sill, range_, nugget):
    """PyKrige's parameters by name: in a list its first one would be the sum of sill and nugget."""
    return {"psill": sill, "range": range_, "nugget": nugget}


def pykrige(model, parameters, stations=STATIONS, values=VALUES, cells=CELLS, **settings):
    k = OrdinaryKriging(*stations.T, values, variogram_model=model, variogram_parameters=parameters, **settings)
    return np.column_stack(k.execute("points", *cells.T))


@pytest.mark.parametrize("nugget", NUGGETS)
@pytest.mark.parametrize(("anisotropy", "angle", "ratio"), [(None, 0.0, 1.0), ((30.0, 2.0), 60.0, 2.0)])
@pytest.mark.parametrize("model", ["spherical", "exponential", "gaussian"])
def test_pykrige_all_stations(model, nugget, anisotropy, angle, ratio):
    # PyKrige's exponential range is three scales, its gaussian range 7/4 of one; its angle runs counter-clockwise
    # from east, so azimuth 30 degrees is its 60.
    if model == "gaussian" and nugget == 0.0:
        nugget = 1e-3  # without any it is ill-conditioned: compared with the textbook in test_kriging
    scale = 250.0
    ours, theirs = {
        "spherical": (scale, scale),
        "exponential": (scale * np.log(20.0), 3.0 * scale),
        "gaussian": (scale * np.sqrt(np.log(20.0)), 1.75 * scale),
    }[model]
    reference = pykrige(model, partial(1.5, theirs, nugget), anisotropy_angle=angle, anisotropy_scaling=ratio)
    c = Covariance([Structure(model, 1.5, ours)], small_scale=nugget, anisotropy=anisotropy)
    assert both(Kriging(c, None)) == pytest.approx(reference, abs=1e-8)


@pytest.mark.parametrize("nu", [0.8, 1.5, 2.5])
@pytest.mark.parametrize("nugget", NUGGETS[1:])
def test_gstools_matern(nu, nugget):
    # GSTools' Matérn length is sqrt(nu) times ours.
    structure = Structure("matern", 1.2, 700.0, nu)
    model = gstools.Matern(dim=2, var=1.2, len_scale=structure.scale_m * np.sqrt(nu), nu=nu, nugget=nugget, rescale=1.0)
    krige = gstools.krige.Ordinary(model, STATIONS.T, VALUES, exact=True)
    mean, variance = krige(CELLS.T)
    # GSTools leaves the nugget out of what it predicts, and we predict the bed with it.
    reference = np.column_stack([mean, variance])
    found = both(Kriging(Covariance([structure], small_scale=nugget), None))
    shift = np.round((found[:, 1] - reference[:, 1]).mean() / nugget)
    assert found[:, 0] == pytest.approx(reference[:, 0], abs=1e-8)
    assert found[:, 1] == pytest.approx(reference[:, 1] + shift * nugget, abs=1e-8)


def test_gstools_anisotropy():
    # Azimuth 30 degrees clockwise from north is pi/3 counter-clockwise from east.
    scale = 1200.0 / np.log(20.0)
    model = gstools.Exponential(dim=2, var=1.0, len_scale=[scale, scale / 2.0], angles=np.pi / 3.0, rescale=1.0)
    mean, variance = gstools.krige.Ordinary(model, STATIONS.T, VALUES)(CELLS.T)
    c = Covariance([Structure("exponential", 1.0, 1200.0)], anisotropy=(30.0, 2.0))
    assert both(Kriging(c, None)) == pytest.approx(np.column_stack([mean, variance]), abs=1e-8)


@pytest.mark.parametrize("nugget", NUGGETS)
def test_pykrige_drift(nugget):
    slope, cell_slope = np.sqrt(STATIONS[:, 0]), np.sqrt(np.abs(CELLS[:, 0]))
    k = UniversalKriging(
        *STATIONS.T, VALUES, variogram_model="exponential", variogram_parameters=partial(1.5, 600.0, nugget),
        drift_terms=["specified"], specified_drift=[slope],
    )  # fmt: skip
    reference = np.column_stack(k.execute("points", *CELLS.T, specified_drift_arrays=[cell_slope]))
    c = Covariance([Structure("exponential", 1.5, 200.0 * np.log(20.0))], small_scale=nugget)
    found = both(Kriging(c, None), drift=slope, cell_drift=cell_slope)
    assert found == pytest.approx(reference, abs=1e-8)
    # In tiles, drift fitted locally on all 80 stations is the same thing.
    assert both(Kriging(c, 80, drift="local"), drift=slope, cell_drift=cell_slope) == pytest.approx(reference, abs=1e-8)


@pytest.mark.parametrize("nugget", NUGGETS)
@pytest.mark.parametrize("model", ["spherical", "exponential"])
def test_pykrige_moving_window(model, nugget):
    ours, theirs = (400.0, 400.0) if model == "spherical" else (200.0 * np.log(20.0), 600.0)
    k = OrdinaryKriging(*STATIONS.T, VALUES, variogram_model=model, variogram_parameters=partial(1.5, theirs, nugget))
    reference = np.column_stack(k.execute("points", *CELLS.T, backend="loop", n_closest_points=12))
    c = Covariance([Structure(model, 1.5, ours)], small_scale=nugget)
    assert both(Kriging(c, 12, "nearest")) == pytest.approx(reference, abs=1e-8)


@pytest.mark.parametrize("nugget", NUGGETS)
def test_tiles_against_pykrige_given_just_their_stations(nugget):
    c = Covariance([Structure("exponential", 1.5, 200.0 * np.log(20.0))], small_scale=nugget)
    kriging = Kriging(c, 6)
    found = both(kriging)
    sizes = set()
    for cell, ours in zip(CELLS, found, strict=True):
        theirs = np.zeros(2)
        for own, weight in kriging.neighbourhoods_of(cell):
            sizes.add(len(own))
            parameters = partial(1.5, 600.0, nugget)
            theirs += weight * pykrige("exponential", parameters, STATIONS[own], VALUES[own], cell[None])[0]
        assert ours == pytest.approx(theirs, abs=1e-8)
    assert max(sizes) < 60  # none of them is simply all stations


def test_three_dimensions():
    stations, cells = RNG.random((60, 3)) * 100.0, RNG.random((10, 3)) * 100.0
    k = OrdinaryKriging3D(
        *stations.T, VALUES[:60], variogram_model="spherical", variogram_parameters=partial(1.0, 80.0, 0.1)
    )
    reference = np.column_stack(k.execute("points", *cells.T))
    c = Covariance([Structure("spherical", 1.0, 80.0)], small_scale=0.1)
    assert both(Kriging(c, None), cells, stations, VALUES[:60]) == pytest.approx(reference, abs=1e-8)
