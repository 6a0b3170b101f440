"""What a person holds in a notebook: a useful repr, and a plot on matplotlib axes."""

import subprocess
import sys

import matplotlib as mpl
import numpy as np
import pytest

from texture import Covariance, Structure, read_stations
from texture.recipe import TargetSettings
from texture.targets import read_target


@pytest.fixture(autouse=True)
def no_window():
    mpl.use("Agg")
    yield
    import matplotlib.pyplot as plt

    plt.close("all")


def test_stations_are_drawn_where_they_lie(small):
    stations = read_stations(small)
    assert "30 with sediment from 1 survey" in repr(stations)
    ax = stations.plot("sand")
    drawn = ax.collections[0]
    np.testing.assert_allclose(drawn.get_offsets()[:, 0], stations.table["longitude"])
    np.testing.assert_allclose(drawn.get_array(), stations.table["sand"])
    assert ax.get_xlabel() == "longitude, degrees"
    assert stations.plot(ax=ax) is ax
    with pytest.raises(KeyError, match='no column "silt"; expected mud, sand, gravel'):
        stations.plot("silt")


def test_covariance_is_drawn_as_its_variogram():
    covariance = Covariance([Structure("spherical", 2.0, 1000.0)], small_scale=0.5)
    assert repr(covariance) == "Covariance([Structure('spherical', 2, range_m=1000)], small_scale=0.5)"
    ax = covariance.plot()
    distance, gamma = ax.lines[0].get_data()
    assert distance[-1] == 1500.0
    assert gamma[-1] == pytest.approx(2.5)  # the sill, small-scale included
    rng = np.random.default_rng(1)
    fitted = Covariance.fit(rng.uniform(0, 5e3, (60, 2)), rng.normal(size=60))
    ax = (fitted if isinstance(fitted, Covariance) else fitted[0]).plot()
    assert len(ax.lines) == 3  # points and both fits


def test_target_is_drawn_with_its_open_boundary_or_with_values():
    target = read_target(TargetSettings(bounds=(500e3, 5e6, 504e3, 5.003e6), cell_size=500.0, crs="EPSG:32633"))
    assert repr(target).startswith("<Target raster 6 × 8 of 500: raster, 6 × 8 cells (48 water), about 500 m")
    ax = target.plot()
    assert len(ax.lines[0].get_xdata()) == 24  # cells on the outer edge of 6 × 8
    ax = target.plot(np.arange(48.0), label="number")
    assert ax.collections[0].get_array().max() == 47.0
    assert ax.figure.axes[1].get_ylabel() == "number"


@pytest.mark.slow
def test_result_is_drawn_with_its_stations(plain):
    assert repr(plain).startswith("Kestrel Bight, starting bed\n  rows ")
    ax = plain.plot("gravel")
    assert ax.figure.axes[1].get_ylabel() == "gravel, expected fraction of dry mass"
    assert len(ax.lines[0].get_xdata()) == plain.found.stations.counts["stations"]
    with pytest.raises(ValueError, match=r'no part "silt"; expected one of \[.mud., .sand., .gravel.\]'):
        plain.plot("silt")


def test_nothing_that_is_held_loads_matplotlib():
    code = (
        "import sys, texture.structure, texture.predict, texture.targets, texture.result; "
        "print([m for m in ('matplotlib', 'bokeh', 'pandas') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
