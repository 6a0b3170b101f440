"""Rasters: orientation, half-cell position, areas, and refusals."""

import numpy as np
import pyproj
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets import cell_points, points_per_side, read_target
from texture.targets.corners import AxisCorners


def raster(**changes):
    settings = {"bounds": (500_000.0, 6_600_000.0, 503_000.0, 6_602_000.0), "cell_size": 1000.0, "crs": "EPSG:32631"}
    return read_target(TargetSettings(**(settings | changes)))


def test_rows_run_north_to_south_and_centres_are_half_a_cell_in():
    target = raster()
    assert target.shape == (2, 3)
    assert target.x.tolist() == [500_500, 501_500, 502_500]
    assert target.y.tolist() == [6_601_500, 6_600_500]
    to_plane = pyproj.Transformer.from_crs(4326, 32631, always_xy=True)
    x, y = to_plane.transform(target.longitude, target.latitude)
    np.testing.assert_allclose(x, [500_500, 501_500, 502_500] * 2, atol=1e-4)
    np.testing.assert_allclose(y, [6_601_500] * 3 + [6_600_500] * 3, atol=1e-4)


def test_corners_are_counter_clockwise_and_hold_the_centre():
    target = raster()
    for i in range(target.n_cells):
        ring = shapely.LinearRing(np.column_stack([target.corners[0][i], target.corners[1][i]]))
        assert ring.is_ccw
        assert shapely.Polygon(ring).contains(shapely.Point(target.longitude[i], target.latitude[i]))


def test_area_equals_the_geodesic_polygon():
    target = raster()
    geod = pyproj.Geod(ellps="WGS84")
    expected = [geod.polygon_area_perimeter(target.corners[0][i], target.corners[1][i])[0] for i in range(6)]
    np.testing.assert_allclose(target.area_m2, expected, rtol=1e-6)  # sides are straight in one, geodesic in the other


def test_neighbours_of_a_small_grid():
    target = raster()
    assert sorted(map(tuple, target.edges.tolist())) == [(0, 1), (0, 3), (1, 2), (1, 4), (2, 5), (3, 4), (4, 5)]
    np.testing.assert_allclose(target.distance_m(target.edges), 1000.0, rtol=1e-3)  # the projection's scale is 0.9996


def test_geographic_raster():
    target = raster(bounds=(10.0, 50.0, 10.5, 50.2), cell_size=0.1, crs="EPSG:4326")
    assert target.shape == (2, 5)
    np.testing.assert_allclose(target.longitude[:5], [10.05, 10.15, 10.25, 10.35, 10.45])
    np.testing.assert_allclose(target.latitude[[0, 5]], [50.15, 50.05])


@given(st.integers(1, 5), st.integers(1, 4))
@settings(max_examples=20, deadline=None)
def test_points_inside_cells_average_to_the_centre(columns, per_side):
    target = raster(bounds=(4e6, 3e6, 4e6 + columns * 500.0, 3.001e6), cell_size=500.0, crs="EPSG:3035")
    to_plane = pyproj.Transformer.from_crs(4326, 3035, always_xy=True)

    def plane(lon, lat):
        return np.column_stack(to_plane.transform(lon, lat))

    cells = np.arange(target.n_cells)
    points = cell_points(target, cells, per_side, plane)
    assert points.shape == (target.n_cells, per_side**2, 2)
    x, y = np.meshgrid(target.x, target.y)
    np.testing.assert_allclose(points.mean(axis=1), np.column_stack([x.ravel(), y.ravel()]), atol=1e-3)
    assert np.abs(points - points.mean(axis=1, keepdims=True)).max() <= 250.0


def test_points_per_side_follows_the_range():
    assert [points_per_side("auto", 500.0, r) for r in (20_000.0, 5_000.0, 1_000.0, 0.0)] == [1, 2, 3, 1]
    assert points_per_side(9, 500.0, 1.0) == 3


def test_land_makes_cells_dry(tmp_path):
    import geopandas

    path = tmp_path / "land.geojson"
    land = geopandas.GeoDataFrame(geometry=[shapely.box(500_000, 6_601_000, 502_000, 6_602_000)], crs=32631)
    land.to_crs(4326).to_file(path)
    assert raster(land=path).active.reshape(2, 3).tolist() == [[False, False, True], [True, True, True]]
    with pytest.raises(TargetError, match="no cell is water"):
        raster(land=path, bounds=(500_100.0, 6_601_100.0, 501_100.0, 6_601_600.0), cell_size=100.0)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"bounds": (0.0, 0.0, 1.0, 1.0), "cell_size": 0.5}, "look like degrees, but EPSG:32631 is in metres"),
        ({"crs": "EPSG:4326"}, "too large for degrees, but EPSG:4326 is in degrees"),
        ({"cell_size": 700.0}, r"east - west = 3000 is 4.286 cells of 700; expected a whole number"),
        ({"crs": "EPSG:1"}, 'target.crs = "EPSG:1": not a known coordinate system'),
        ({"land": __file__}, "test_raster.py: cannot be read as polygons"),
    ],
)
def test_mistakes(changes, words):
    with pytest.raises(TargetError, match=words):
        raster(**changes)


def test_repr_says_what_it_is():
    assert "raster, 2 × 3 cells (6 water), about 1,000 m" in repr(raster())


@pytest.mark.parametrize(("x", "y"), [([0.0, 1.0, 2.0], [5.0, 4.0]), ([2.0, 1.0, 0.0], [4.0, 5.0])])
def test_corners_are_counter_clockwise_whichever_way_the_axes_run(x, y):
    corners = AxisCorners(pyproj.Transformer.from_crs(4326, 4326, always_xy=True), np.array(x), np.array(y))
    lon, lat = corners.of(slice(None))
    assert corners.count == 2
    assert (lon * np.roll(lat, -1, axis=1) - np.roll(lon, -1, axis=1) * lat).sum(axis=1).tolist() == [2.0, 2.0]
    assert lon.min(axis=1).tolist() == sorted([0.0, 1.0], reverse=x[0] > x[1])
    assert corners.bounds == (0.0, 4.0, 2.0, 5.0)
