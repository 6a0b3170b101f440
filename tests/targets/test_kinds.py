"""Meshes, points, templates, projected grids and halos: read, written, reopened, and one contract for all."""

import numpy as np
import pyproj
import pytest
import rasterio
import shapely
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial import Delaunay

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets import cell_points, read_target
from texture.targets.mesh import Mesh

TO_DEGREES = pyproj.Transformer.from_crs(32626, 4326, always_xy=True)


def read(path, **changes):
    return read_target(TargetSettings(file=path, **changes))


def write_mesh(path, x, y, faces, start_index=0, degrees=True, **variables):
    """A UGRID file of faces (lists of node numbers from 0)."""
    width = max(map(len, faces))
    table = np.full((len(faces), width), -999, dtype=np.int32)
    for i, face in enumerate(faces):
        table[i, : len(face)] = np.array(face) + start_index
    lon, lat = TO_DEGREES.transform(x, y) if degrees else (x, y)
    units = ("degrees_east", "degrees_north") if degrees else ("m", "m")
    names = ("longitude", "latitude") if degrees else ("projection_x_coordinate", "projection_y_coordinate")
    xr.Dataset(
        {
            "net": ((), 0, {"cf_role": "mesh_topology", "topology_dimension": 2, "node_coordinates": "nx ny",
                            "face_node_connectivity": "fn"}),
            "fn": (("f", "c"), table, {"cf_role": "face_node_connectivity", "start_index": start_index, "_FillValue": -999}),
            "nx": ("n", lon, {"units": units[0], "standard_name": names[0]}),
            "ny": ("n", lat, {"units": units[1], "standard_name": names[1]}),
            **variables,
        }
    ).to_netcdf(path)  # fmt: skip
    return path


def square_mesh(n=4, size=1000.0):
    """Squares of n × n, the first row cut into triangles."""
    x, y = (a.ravel() for a in np.meshgrid(np.arange(n + 1) * size + 500_000, np.arange(n + 1) * size + 4_900_000))
    faces = []
    for r in range(n):
        for c in range(n):
            a = r * (n + 1) + c
            square = [a, a + 1, a + n + 2, a + n + 1]
            faces += [square[:3], [square[0], square[2], square[3]]] if r == 0 else [square]
    return x, y, faces


@pytest.mark.parametrize("start_index", [0, 1])
def test_mixed_faces_areas_neighbours_and_edge(tmp_path, start_index):
    target = read(write_mesh(tmp_path / "m.nc", *square_mesh(), start_index=start_index))
    assert target.kind == "mesh"
    assert target.shape == (8 + 12,)
    np.testing.assert_allclose(target.area_m2[:8], 0.5e6, rtol=2e-3)  # the projection's scale is 0.9996
    np.testing.assert_allclose(target.area_m2[8:], 1e6, rtol=2e-3)
    # Sides inside a 4 × 4 lattice: 12 + 12, and four diagonals.
    assert len(target.edges) == 28
    (opening,) = target.openings
    assert opening.length_m == pytest.approx(16_000, rel=1e-3)
    assert set(opening.sides) == {"north", "east", "south", "west"}
    assert target.open_cells.sum() == 13
    assert target.side_cells["north"].sum() == 4
    assert target.side_cells["south"].sum() == 4


def test_clockwise_faces_are_turned_and_repeated_fill_is_moved(tmp_path):
    x, y, faces = square_mesh()
    turned = read(write_mesh(tmp_path / "t.nc", x, y, [f[::-1] for f in faces]))
    plain = read(write_mesh(tmp_path / "m.nc", x, y, faces))
    np.testing.assert_allclose(turned.area_m2, plain.area_m2, rtol=1e-12)
    assert turned.open_cells.sum() == plain.open_cells.sum()
    for lon, lat in zip(*turned.corners, strict=True):
        assert shapely.LinearRing(np.column_stack([lon, lat])).is_ccw


def test_nodes_carry_their_median_dual(tmp_path):
    target = read(write_mesh(tmp_path / "m.nc", *square_mesh()), location="node")
    assert target.shape == (25,)
    assert target.area_m2.sum() == pytest.approx(16e6, rel=2e-3)
    np.testing.assert_allclose(target.area_m2[[12, 24]], [1e6, 0.25e6], rtol=2e-3)  # inside, and a corner of a square
    assert target.open_cells.sum() == 16
    assert target.data_attributes["location"] == "node"


def test_projected_nodes_need_their_system(tmp_path):
    path = write_mesh(tmp_path / "m.nc", *square_mesh(), degrees=False)
    with pytest.raises(TargetError, match=r'nodes are in "m", not degrees; give target.crs'):
        read(path)
    same = read(write_mesh(tmp_path / "d.nc", *square_mesh()))
    np.testing.assert_allclose(read(path, crs="EPSG:32626").longitude, same.longitude, atol=1e-9)


def test_coast_is_no_open_boundary(tmp_path):
    import geopandas

    land = tmp_path / "land.geojson"
    box = shapely.box(490_000, 4_904_000, 510_000, 4_910_000)  # north of the mesh
    geopandas.GeoDataFrame(geometry=[box], crs=32626).to_crs(4326).to_file(land)
    target = read(write_mesh(tmp_path / "m.nc", *square_mesh()), land=land)
    (opening,) = target.openings
    assert opening.length_m == pytest.approx(12_000, rel=1e-3)
    assert set(opening.sides) == {"east", "south", "west"}


@given(st.integers(0, 1000))
@settings(max_examples=15, deadline=None)
def test_any_triangulation_covers_its_hull_once(seed):
    rng = np.random.default_rng(seed)
    x, y = rng.uniform(0, 0.1, 40), rng.uniform(50, 50.1, 40)
    faces = Delaunay(np.column_stack([x, y])).simplices.astype(np.int64)
    for location in ("face", "node"):
        lon, lat, cell = Mesh(faces, x, y, location).pieces()
        doubled = (lon * np.roll(lat, -1, axis=1) - np.roll(lon, -1, axis=1) * lat).sum(axis=1)
        hull = shapely.MultiPoint(np.column_stack([x, y])).convex_hull.area
        assert np.abs(doubled).sum() / 2 == pytest.approx(hull, rel=1e-6)
        assert cell.max() == (len(faces) if location == "face" else 40) - 1


def test_points_inside_faces_average_to_their_middle(tmp_path):
    target = read(write_mesh(tmp_path / "m.nc", *square_mesh()))
    to_plane = pyproj.Transformer.from_crs(4326, 32626, always_xy=True)
    points = cell_points(target, np.arange(20), 3, lambda lon, lat: np.column_stack(to_plane.transform(lon, lat)))
    assert points.shape == (20, 12, 2)
    centres = np.column_stack(to_plane.transform(target.longitude, target.latitude))
    np.testing.assert_allclose(points.mean(axis=1), centres, atol=0.5)


def test_written_mesh_opens_as_ugrid(tmp_path):
    target = read(write_mesh(tmp_path / "m.nc", *square_mesh()))
    out = target.coordinates().assign(
        mud=(target.dims, np.arange(20.0), {"long_name": "mud", "units": "1", **target.data_attributes})
    )
    out.attrs["Conventions"] = "CF-1.11 UGRID-1.0"
    out.to_netcdf(tmp_path / "out.nc")
    again = read(tmp_path / "out.nc")
    np.testing.assert_allclose(again.longitude, target.longitude, atol=1e-12)
    np.testing.assert_array_equal(again.topology.faces, target.topology.faces)


@pytest.mark.parametrize(
    ("break_it", "words"),
    [
        (lambda x, y, f: (x, y, [*f[:-1], [0, 1, 99]]), r"face 19 \(counted from 0\) has node 99, expected one of 25"),
        (lambda x, y, f: (x, y, [*f[:-1], [0, 1]]), "face 19 .* has fewer than 3 nodes"),
        (lambda x, y, f: (x, y, [*f[:-1], [0, 1, 1]]), "face 19 .* has no area"),
    ],
)
def test_broken_meshes(tmp_path, break_it, words):
    with pytest.raises(TargetError, match=words):
        read(write_mesh(tmp_path / "m.nc", *break_it(*square_mesh())))


def test_template_keeps_bounds_projection_and_dry_pixels(tmp_path):
    path = tmp_path / "depth.tif"
    data = np.arange(12, dtype="f4").reshape(3, 4)
    data[0, :2] = -9999
    with rasterio.open(
        path, "w", driver="GTiff", width=4, height=3, count=1, dtype="float32", crs="EPSG:32626", nodata=-9999,
        transform=rasterio.Affine(500, 0, 502_000, 0, -500, 4_926_000),
    ) as image:  # fmt: skip
        image.write(data, 1)
    target = read(path)
    assert target.x.tolist() == [502_250, 502_750, 503_250, 503_750]
    assert target.y.tolist() == [4_925_750, 4_925_250, 4_924_750]
    assert target.active.reshape(3, 4).tolist()[0] == [False, False, True, True]
    assert target.crs.to_epsg() == 32626
    assert "2 pixels of depth.tif have no data: taken as dry" in target.notes


@pytest.mark.parametrize("upward", [True, False])
@pytest.mark.parametrize("epsg", [32626, 3995])
def test_projected_cf_grid_keeps_the_order_of_its_rows(tmp_path, upward, epsg):
    crs = pyproj.CRS.from_epsg(epsg)
    y = np.array([100.0, 600.0, 1100.0]) + (4_900_000 if epsg == 32626 else 0)
    y = y if upward else y[::-1]
    x = np.array([500_000.0, 500_500.0])
    xr.Dataset(
        {"sea": (("north", "east"), np.ones((3, 2), "i4"), {"standard_name": "sea_binary_mask", "grid_mapping": "m"}),
         "m": ((), 0, crs.to_cf())},
        coords={"north": ("north", y, {"standard_name": "projection_y_coordinate", "units": "m"}),
                "east": ("east", x, {"standard_name": "projection_x_coordinate", "units": "m"})},
    ).to_netcdf(tmp_path / "p.nc")  # fmt: skip
    target = read(tmp_path / "p.nc")
    assert target.kind == "raster"
    assert target.dims == ("north", "east")
    assert target.crs.equals(crs, ignore_axis_order=True)
    lon, lat = pyproj.Transformer.from_crs(crs, 4326, always_xy=True).transform(x[0], y[0])
    assert (target.longitude[0], target.latitude[0]) == pytest.approx((lon, lat), abs=1e-9)
    for i in range(6):
        assert shapely.LinearRing(np.column_stack([c[i] for c in target.corners])).is_ccw
    np.testing.assert_array_equal(target.coordinates()["north"], y)


def projected(path, units="m", scale=1.0, mapping=True):
    """A polar stereographic grid of 2 × 3 cells of 25 km around no pole of its own."""
    crs = pyproj.CRS.from_epsg(3995)
    x, y = np.array([500_000.0, 525_000.0, 550_000.0]), np.array([-700_000.0, -675_000.0])
    about = {"units": units} if units else {}
    sea = {"standard_name": "sea_binary_mask"} | ({"grid_mapping": "m"} if mapping else {})
    xr.Dataset(
        {"sea": (("y", "x"), np.ones((2, 3), "i4"), sea)} | ({"m": ((), 0, crs.to_cf())} if mapping else {}),
        coords={"y": ("y", y * scale, {"standard_name": "projection_y_coordinate", **about}),
                "x": ("x", x * scale, {"standard_name": "projection_x_coordinate", **about})},
    ).to_netcdf(path)  # fmt: skip
    return path


def test_projection_coordinates_in_kilometres(tmp_path):
    metres, kilometres = read(projected(tmp_path / "m.nc")), read(projected(tmp_path / "km.nc", "km", 1e-3))
    np.testing.assert_allclose(kilometres.x, metres.x, rtol=1e-12)
    np.testing.assert_allclose(kilometres.area_m2, metres.area_m2, rtol=1e-9)
    np.testing.assert_allclose(read(projected(tmp_path / "none.nc", "")).x, metres.x)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"units": "furlong"}, '"x" is in "furlong", expected m or km'),
        ({"mapping": False}, "projection coordinates without a grid mapping; give target.crs"),
    ],
)
def test_projected_grids_that_do_not_say_enough(tmp_path, changes, words):
    with pytest.raises(TargetError, match=words) as caught:
        read(projected(tmp_path / "p.nc", **changes))
    assert "\n" not in str(caught.value)


def test_geotiff_of_an_upward_grid_is_not_upside_down(tmp_path):
    from texture.output import pixel_grid

    crs = pyproj.CRS.from_epsg(32626)
    y, x = np.array([4_900_100.0, 4_900_600.0, 4_901_100.0]), np.array([500_000.0, 500_500.0])
    xr.Dataset(
        {"m": ((), 0, crs.to_cf())},
        coords={"y": ("y", y, {"standard_name": "projection_y_coordinate", "units": "m"}),
                "x": ("x", x, {"standard_name": "projection_x_coordinate", "units": "m"})},
    ).to_netcdf(tmp_path / "p.nc")  # fmt: skip
    grid = pixel_grid(read(tmp_path / "p.nc"))
    assert grid.cell.tolist() == [[4, 5], [2, 3], [0, 1]]
    assert grid.transform[5] == 4_901_350.0


def test_halo_gets_no_bed_of_its_own_and_the_edge_is_inside_it():
    target = read_target(
        TargetSettings(
            bounds=(500_000.0, 4_900_000.0, 510_000.0, 4_908_000.0), cell_size=1000.0, crs="EPSG:32626", halo_cells=1
        )
    )
    active = target.active.reshape(8, 10)
    assert active[1:-1, 1:-1].all()
    assert active.sum() == 6 * 8
    assert target.open_cells.reshape(8, 10)[1, 1:-1].all()
    assert target.open_cells.sum() == 24
    assert target.openings[0].length_m == pytest.approx(24_000, rel=0.02)


def test_places_from_a_table_in_degrees_or_metres(tmp_path):
    (tmp_path / "a.csv").write_text("name;Longitude;Latitude\np;-26.5;44.2\nq;-26.4;44.3\n")
    target = read(tmp_path / "a.csv")
    assert target.kind == "points"
    assert target.longitude.tolist() == [-26.5, -26.4]
    assert target.area_m2.tolist() == [1.0, 1.0]
    assert not target.open_cells.any()
    x, y = pyproj.Transformer.from_crs(4326, 32626, always_xy=True).transform(target.longitude, target.latitude)
    (tmp_path / "b.csv").write_text("x,y\n" + "".join(f"{a},{b}\n" for a, b in zip(x, y, strict=True)))
    np.testing.assert_allclose(read(tmp_path / "b.csv", crs="EPSG:32626").latitude, target.latitude, atol=1e-9)
    with pytest.raises(TargetError, match=r"too large for degrees; give target.crs"):
        read(tmp_path / "b.csv")
    (tmp_path / "c.csv").write_text("lon,lat\n1,2\nx,3\n")
    with pytest.raises(TargetError, match=r'c.csv row 3, column "lon": found "x", expected a number'):
        read(tmp_path / "c.csv")
    (tmp_path / "d.csv").write_text("a,b\n1,2\n")
    with pytest.raises(TargetError, match=r"no column for x; expected one of longitude, lon"):
        read(tmp_path / "d.csv")


def test_places_from_a_vector_file(tmp_path):
    import geopandas

    points = [shapely.Point(500_000, 4_900_000), shapely.Point(501_000, 4_900_000)]
    geopandas.GeoDataFrame(geometry=points, crs=32626).to_file(tmp_path / "p.gpkg")
    target = read(tmp_path / "p.gpkg")
    np.testing.assert_allclose(target.longitude[0], -27.0, atol=1e-9)
