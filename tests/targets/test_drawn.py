"""Lines and polygons that name cells."""

import json

import numpy as np
import pyproj
import pytest

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets import read_target
from texture.targets.drawn import drawn_cells

WEST, SOUTH, SIZE = 500_000.0, 4_900_000.0, 1000.0
TARGET = read_target(
    TargetSettings(bounds=(WEST, SOUTH, WEST + 6000.0, SOUTH + 4000.0), cell_size=SIZE, crs="EPSG:32626")
)


def draw(path, *geometries, crs=True):
    content = {"type": "FeatureCollection", "features": [
        {"type": "Feature", "properties": {}, "geometry": {"type": kind, "coordinates": c}} for kind, c in geometries
    ]}  # fmt: skip
    path.write_text(json.dumps(content))
    return path


def degrees(x, y):
    return list(pyproj.Transformer.from_crs(32626, 4326, always_xy=True).transform(WEST + x, SOUTH + y))


def test_a_line_takes_the_cells_that_it_crosses(tmp_path):
    line = [degrees(500, 3500), degrees(500, 1500), degrees(2500, 1500)]
    found = drawn_cells(draw(tmp_path / "edge.geojson", ("LineString", line)), TARGET).reshape(TARGET.shape)
    expected = np.zeros((4, 6), dtype=bool)  # rows from the north
    expected[0:3, 0] = True
    expected[2, 1:3] = True
    np.testing.assert_array_equal(found, expected)


def test_a_polygon_takes_the_cells_whose_centre_it_covers(tmp_path):
    ring = [degrees(x, y) for x, y in [(-100, -100), (2600, -100), (2600, 1400), (-100, 1400), (-100, -100)]]
    found = drawn_cells(draw(tmp_path / "edge.geojson", ("Polygon", [ring])), TARGET).reshape(TARGET.shape)
    assert np.argwhere(found).tolist() == [[3, 0], [3, 1], [3, 2]]


def test_the_same_on_a_grid_beyond_the_date_line(tmp_path):
    settings = TargetSettings(bounds=(179.0, 10.0, 181.0, 11.0), cell_size=0.5, crs="EPSG:4326")
    line = [[-179.75, 10.1], [-179.75, 10.9]]
    found = drawn_cells(draw(tmp_path / "edge.geojson", ("LineString", line)), read_target(settings))
    assert np.flatnonzero(found).tolist() == [2, 6]


@pytest.mark.parametrize(
    ("geometry", "message"),
    [
        (("Point", [0.0, 0.0]), "edge.geojson: holds Point; expected lines or polygons"),
        (("LineString", [[0.0, 0.0], [1.0, 1.0]]), r"edge.geojson: touches no water cell of .* longitude -27"),
    ],
)
def test_drawings_that_name_nothing(tmp_path, geometry, message):
    with pytest.raises(TargetError, match=message):
        drawn_cells(draw(tmp_path / "edge.geojson", geometry), TARGET)
    (tmp_path / "edge.geojson").write_text("words")
    with pytest.raises(TargetError, match=r"edge.geojson: cannot be read as lines or polygons"):
        drawn_cells(tmp_path / "edge.geojson", TARGET)
