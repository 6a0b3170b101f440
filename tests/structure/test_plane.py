import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pyproj import Geod

from texture.errors import StructureError
from texture.predict import Kriging
from texture.structure import Covariance
from texture.structure.plane import Plane, check_metres

WGS84 = Geod(ellps="WGS84")


@given(st.floats(-179.0, 179.0), st.floats(-80.0, 80.0), st.integers(0, 1000))
def test_distances_are_those_on_the_ellipsoid(lon0, lat0, seed):
    # 200 km across: the plane stretches by less than 2e-4 (0.5 (r/R)^2 / 3 at r = 100 km is 4e-5).
    rng = np.random.default_rng(seed)
    lon, lat = lon0 + rng.uniform(-0.9, 0.9, 6), lat0 + rng.uniform(-0.9, 0.9, 6)
    plane = Plane.choose(lon, lat)
    points = plane.to_metres(lon, lat)
    true = WGS84.inv(lon[:-1], lat[:-1], lon[1:], lat[1:])[2]
    assert np.linalg.norm(np.diff(points, axis=0), axis=1) == pytest.approx(true, rel=2e-4)
    back = plane.to_degrees(points)
    assert back[1] == pytest.approx(lat, abs=1e-9)
    assert (back[0] - lon + 180.0) % 360.0 == pytest.approx(180.0, abs=1e-9)


def test_one_degree_of_longitude_at_sixty_north():
    # 55,799.4704 m along the parallel of WGS 84 (flat degrees would be wrong by a factor two). The chord of an arc
    # of one degree of longitude there is shorter by 4e-5.
    plane = Plane.choose([10.0, 11.0], [60.0, 60.0])
    a, b = plane.to_metres([10.0, 11.0], [60.0, 60.0])
    assert np.hypot(*(b - a)) == pytest.approx(55799.4704, rel=5e-5)


def test_projected_crs_is_used_as_it_is():
    plane = Plane.choose([6.0], [60.0], crs="EPSG:32631")
    # UTM zone 31, WGS 84, 6 E 60 N: PROJ and a sixth-order Krüger series agree on these.
    assert plane.kind == "projected"
    assert plane.to_metres([6.0], [60.0])[0] == pytest.approx([667294.8211, 6655205.4836], abs=1e-3)
    same = plane.to_metres([667294.8211], [6655205.4836], crs="EPSG:32631")[0]
    assert same == pytest.approx([667294.8211, 6655205.4836], abs=1e-6)


def test_the_date_line_is_no_edge():
    plane = Plane.choose([179.5, -179.5], [-18.0, -18.0])
    a, b = plane.to_metres([179.5, -179.5], [-18.0, -18.0])
    assert np.hypot(*(b - a)) == pytest.approx(WGS84.inv(179.5, -18.0, -179.5, -18.0)[2], rel=1e-4)


def test_very_large_areas_use_the_chord():
    lon, lat = np.array([-20.0, 10.0]), np.array([40.0, 60.0])
    plane = Plane.choose(lon, lat)
    assert plane.kind == "chord"
    points = plane.to_metres(lon, lat)
    assert points.shape == (2, 3)
    arc = WGS84.inv(-20.0, 40.0, 10.0, 60.0)[2]
    chord = float(np.linalg.norm(points[1] - points[0]))
    # Chord of a circle of that arc; the ellipsoid's radius varies by 0.3 %.
    assert chord == pytest.approx(2.0 * 6_371_000.0 * np.sin(arc / 2.0 / 6_371_000.0), rel=3e-3)
    assert plane.to_degrees(points)[0] == pytest.approx(lon, abs=1e-9)


def test_geocentric_point_of_the_guidance_note():
    # EPSG guidance note 7-2: 53 48 33.820 N, 2 07 46.380 E at 73 m gives 3771793.968, 140253.342, 5124304.349; we
    # stand on the ellipsoid, 73 m lower along the normal.
    plane = Plane("chord", "EPSG:4978")
    lon, lat = 2 + 7 / 60 + 46.380 / 3600, 53 + 48 / 60 + 33.820 / 3600
    up = [
        np.cos(np.radians(lat)) * np.cos(np.radians(lon)),
        np.cos(np.radians(lat)) * np.sin(np.radians(lon)),
        np.sin(np.radians(lat)),
    ]
    found = plane.to_metres([lon], [lat])[0] + 73.0 * np.array(up)
    assert found == pytest.approx([3771793.968, 140253.342, 5124304.349], abs=0.02)


def test_degrees_are_not_metres():
    with pytest.raises(StructureError, match="look like degrees, expected metres"):
        check_metres([[3.0, 55.0], [3.2, 55.1]])
    check_metres([[500_000.0, 55.0], [500_100.0, 80.0]])
    check_metres([[0.0, 0.0], [10.0, 0.0], [0.0, 10.0]])  # a worked example around its origin
    rng = np.random.default_rng(1)
    degrees = np.column_stack([rng.uniform(-27.0, -26.0, 30), rng.uniform(44.0, 44.6, 30)])
    for call in (Covariance.fit, Kriging(Covariance([], small_scale=1.0)).fit):
        with pytest.raises(StructureError, match=r"convert them with Plane\.choose"):
            call(degrees, rng.normal(size=30))
    Covariance.fit(degrees - degrees.mean(axis=0), rng.normal(size=30))


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: Plane.choose([500_000.0], [6_000_000.0]), "expected degrees on the globe; if these are metres"),
        (lambda: Plane.choose([1.0], [2.0], crs="EPSG:2263"), "US survey foot, expected metre"),
        (lambda: Plane.choose([1.0, np.nan], [2.0, 3.0]), "position 1: found longitude nan"),
        (lambda: Plane.choose([], []), "expected"),
    ],
)
def test_errors(call, message):
    with pytest.raises(StructureError, match=message):
        call()
