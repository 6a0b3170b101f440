"""Maps and charts: drawn the right way round, at a size that fits the page."""

import numpy as np
import pytest

from texture.recipe import TargetSettings
from texture.report.encode import picture
from texture.report.maps import Layer, draw_maps
from texture.targets import read_target


@pytest.fixture
def target():
    return read_target(
        TargetSettings(bounds=(500_000.0, 4_900_000.0, 512_000.0, 4_906_000.0), cell_size=500.0, crs="EPSG:32626")
    )


def test_north_is_up_and_east_is_right(target):
    values = np.zeros(target.n_cells)
    values[0] = 1.0  # the first cell of a raster is its north-west corner
    figure = draw_maps(target, [Layer("a", values)], columns=1)
    mesh = figure.axes[0].collections[0]
    corners = np.asarray(mesh.get_coordinates())
    shown = np.asarray(mesh.get_array())
    row, column = np.argwhere(shown == 1.0)[0]
    x, y = corners[row : row + 2, column : column + 2].reshape(-1, 2).mean(axis=0)
    assert (x, y) == pytest.approx((target.longitude[0], target.latitude[0]), abs=1e-6)
    assert y > target.latitude.mean()
    assert x < target.longitude.mean()


def test_scale_bar_has_its_length(target):
    import pyproj

    figure = draw_maps(target, [Layer("a", np.zeros(target.n_cells))], columns=1)
    axis = figure.axes[0]
    bar = axis.lines[-1].get_xydata()
    length = pyproj.Geod(ellps="WGS84").line_length(bar[:, 0], bar[:, 1])
    assert [t.get_text() for t in axis.texts if "km" in t.get_text()] == ["2 km"]
    assert length == pytest.approx(2000.0, rel=0.005)  # the bar is drawn on a sphere


def test_classes_show_only_what_is_there_in_their_own_colours(target):
    values = np.where(np.arange(target.n_cells) % 2, 3.0, 7.0)
    names, colours = {3: "three", 5: "five", 7: "seven"}, {3: (255, 0, 0), 5: (0, 255, 0), 7: (0, 0, 255)}
    figure = draw_maps(target, [Layer("classes", values, names=names, colours=colours)], columns=1)
    labels = [t.get_text() for t in figure.axes[1].get_yticklabels()]
    assert labels == ["three", "seven"]
    mesh = figure.axes[0].collections[0]
    assert [tuple(c[:3]) for c in mesh.cmap(mesh.norm([0, 1]))] == [(1.0, 0.0, 0.0), (0.0, 0.0, 1.0)]


def test_same_figure_same_bytes(target):
    drawn = [picture(draw_maps(target, [Layer("a", np.linspace(0, 1, target.n_cells))]), "c", "alt") for _ in range(2)]
    assert drawn[0].content == drawn[1].content
    assert drawn[0].content.startswith(b"\x89PNG")


def test_many_cells_are_thinned():
    target = read_target(
        TargetSettings(bounds=(500_000.0, 4_900_000.0, 700_000.0, 4_950_000.0), cell_size=100.0, crs="EPSG:32626")
    )
    figure = draw_maps(target, [Layer("a", np.zeros(target.n_cells))], columns=1)
    assert max(np.asarray(figure.axes[0].collections[0].get_coordinates()).shape[:2]) <= 601
