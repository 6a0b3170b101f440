"""Grids from CF files: coordinates, masks, corners, and refusals."""

import numpy as np
import pyproj
import pytest
import shapely
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets import Target, cell_points, read_target
from texture.targets.structured import Structured

LON = {"units": "degrees_east", "standard_name": "longitude"}
LAT = {"units": "degrees_north", "standard_name": "latitude"}


def rotated(rows=6, columns=8, lon0=-25.0, lat0=45.0, angle=20.0, step=0.05):
    """Cell centres of a rotated grid in degrees."""
    j, i = np.meshgrid(np.arange(rows), np.arange(columns), indexing="ij")
    turn = np.radians(angle)
    return (
        lon0 + step * (i * np.cos(turn) - j * np.sin(turn)),
        lat0 + step * (i * np.sin(turn) + j * np.cos(turn)),
    )


def write(path, lon, lat, mask=None, mask_attrs=None, dims=("row", "column"), **more):
    data = {} if mask is None else {"wet": (dims, mask, mask_attrs or {"standard_name": "sea_binary_mask"})}
    data |= more
    coords = {"lon": (dims, lon, LON), "lat": (dims, lat, LAT)}
    xr.Dataset(data, coords=coords).to_netcdf(path)
    return path


def read(path, **settings):
    return read_target(TargetSettings(file=path, **settings))


def test_rotated_grid_keeps_file_order_and_names_its_dimensions(tmp_path):
    lon, lat = rotated()
    target = read(write(tmp_path / "g.nc", lon, lat))
    assert target.dims == ("row", "column")
    assert target.shape == (6, 8)
    np.testing.assert_array_equal(target.longitude.reshape(6, 8), lon)
    np.testing.assert_array_equal(target.latitude.reshape(6, 8), lat)
    assert target.active.all()
    assert any("every cell is taken as water" in note for note in target.notes)


def test_without_a_mask_the_note_names_what_could_tell(tmp_path):
    lon, lat = rotated()
    wet = np.ones((6, 8))
    wet[0] = 0
    told = {"wetness": (("row", "column"), wet), "h": (("row", "column"), np.where(wet == 1, 20.0, np.nan))}
    notes = " ".join(read(write(tmp_path / "told.nc", lon, lat, **told)).notes)
    assert '"wetness" holds 0 and 1, "h" is missing in 8 cells: if one of them tells, name a mask' in notes
    assert read(tmp_path / "told.nc", mask="wetness").active.sum() == 40


def test_corners_between_centres_are_exact_on_a_regular_grid(tmp_path):
    lon, lat = rotated(angle=0.0)
    target = read(write(tmp_path / "g.nc", lon, lat))
    np.testing.assert_allclose(target.corners[0][0], [-25.025, -24.975, -24.975, -25.025], atol=1e-12)
    np.testing.assert_allclose(target.corners[1][0], [44.975, 44.975, 45.025, 45.025], atol=1e-12)


def test_bounds_in_the_file_are_used_and_turned_counter_clockwise(tmp_path):
    lon, lat = rotated(angle=0.0)
    offsets = np.array([(-1, -1), (-1, 1), (1, 1), (1, -1)]) * 0.02  # clockwise, and smaller than the spacing
    path = tmp_path / "g.nc"
    xr.Dataset(
        {
            "lon_b": (("r", "c", "v"), lon[..., None] + offsets[:, 0]),
            "lat_b": (("r", "c", "v"), lat[..., None] + offsets[:, 1]),
        },
        coords={
            "lon": (("r", "c"), lon, LON | {"bounds": "lon_b"}),
            "lat": (("r", "c"), lat, LAT | {"bounds": "lat_b"}),
        },
    ).to_netcdf(path)
    target = read(path)
    np.testing.assert_allclose(sorted(target.corners[0][0]), [-25.02, -25.02, -24.98, -24.98])
    geod = pyproj.Geod(ellps="WGS84")
    area, _ = geod.polygon_area_perimeter(target.corners[0][0], target.corners[1][0])
    assert area > 0  # counter-clockwise
    assert target.area_m2[0] == pytest.approx(area, rel=1e-5)


def test_one_dimensional_descending_latitude(tmp_path):
    path = tmp_path / "g.nc"
    lat, lon = np.array([50.2, 50.1, 50.0]), np.array([3.0, 3.1, 3.2])
    xr.Dataset(
        {"a": (("lat", "lon"), np.zeros((3, 3)))}, coords={"lat": ("lat", lat, LAT), "lon": ("lon", lon, LON)}
    ).to_netcdf(path)
    target = read(path)
    assert target.dims == ("lat", "lon")
    np.testing.assert_allclose(target.latitude, np.repeat(lat, 3))
    assert target.openings[0].sides[0] == "north"


@pytest.mark.parametrize("lon0", [179.9, 359.9, -0.1, 200.0])
def test_date_line_and_0_to_360(tmp_path, lon0):
    lon, lat = rotated(lon0=lon0)
    wrapped = lon % 360.0 if lon0 > 180.0 else (lon + 180.0) % 360.0 - 180.0
    target = read(write(tmp_path / "g.nc", wrapped, lat))
    plain = read(write(tmp_path / "p.nc", rotated(lon0=10.0)[0], lat))
    assert np.ptp(target.longitude) < 1.0
    np.testing.assert_allclose(target.area_m2, plain.area_m2, rtol=1e-6)
    assert [str(o) for o in target.openings] == [str(o) for o in plain.openings]


@pytest.mark.parametrize(
    ("attrs", "water"),
    [
        ({"standard_name": "sea_binary_mask"}, 1),
        ({"standard_name": "land_binary_mask"}, 0),
        ({"flag_values": np.array([1, 0], dtype="i4"), "flag_meanings": "dry_land sea_water"}, 0),
    ],
)
def test_mask_is_read_by_its_attributes(tmp_path, attrs, water):
    lon, lat = rotated()
    mask = np.full(lon.shape, 1 - water, dtype="i4")
    mask[2:, 3:] = water
    target = read(write(tmp_path / "g.nc", lon, lat, mask, attrs))
    expected = np.zeros(lon.shape, dtype=bool)
    expected[2:, 3:] = True
    np.testing.assert_array_equal(target.active.reshape(lon.shape), expected)


def test_named_mask_without_meaning_is_said(tmp_path):
    lon, lat = rotated()
    path = write(tmp_path / "g.nc", lon, lat, np.ones(lon.shape, "i4"), {"long_name": "mask"})
    assert 'mask "wet" does not say what its values mean: 1 is taken as water' in read(path, mask="wet").notes


def test_mask_rules_over_land_and_mismatches_are_counted(tmp_path):
    import geopandas
    import shapely

    lon, lat = rotated(angle=0.0)
    mask = np.ones(lon.shape, "i4")
    mask[0] = 0
    land = tmp_path / "land.geojson"
    geopandas.GeoDataFrame(geometry=[shapely.box(-26, 44, -24.97, 46)], crs=4326).to_file(land)
    target = read(write(tmp_path / "g.nc", lon, lat, mask), land=land)
    assert target.active.reshape(lon.shape)[1:].all()
    # Column 0 lies on land but is water in rows 1-5; the rest of row 0 is dry but not on land.
    assert "mask and land polygons disagree on 12 of 48 cells: the mask was followed" in target.notes


def test_river_is_an_inlet_and_the_sea_is_open(tmp_path):
    lon, lat = rotated(rows=30, columns=40, angle=0.0)
    mask = np.ones(lon.shape, "i4")
    mask[-3:] = 0
    mask[-3:, 12:14] = 1
    target = read(write(tmp_path / "g.nc", lon, lat, mask))
    sea, river = target.openings
    assert not sea.inlet
    assert river.inlet
    assert set(sea.sides) == {"west", "south", "east"}
    assert river.sides == ("north",)
    assert str(river) == f"north: 2 cells, {river.length_m / 1000:.1f} km, river inlet, not rimmed"
    assert target.open_cells.sum() == 40 + 2 * 26
    wide = read(tmp_path / "g.nc", inlet_width_m=0.0)
    assert wide.open_cells.sum() == target.open_cells.sum() + 2


@given(st.integers(0, 10_000))
@settings(max_examples=40, deadline=None)
def test_openings_hold_each_wet_outer_cell_once(seed):
    rng = np.random.default_rng(seed)
    lon, lat = (a.ravel() for a in rotated(rows=7, columns=9))
    active = rng.random(63) < 0.6
    target = Target(
        "curvilinear", "grid", ("j", "i"), (7, 9), pyproj.CRS("EPSG:4326"), lon, lat, active, Structured((7, 9)), None
    )
    openings = target.openings
    outer = np.zeros((7, 9), dtype=bool)
    outer[[0, -1]] = outer[:, [0, -1]] = True
    cells = np.concatenate([o.cells for o in openings]) if openings else np.array([], int)
    assert sorted(cells.tolist()) == np.flatnonzero(active & outer.ravel()).tolist()


def test_coordinates_come_back_through_xarray_and_cf_xarray(tmp_path):
    import cf_xarray  # noqa: F401

    lon, lat = rotated()
    target = read(write(tmp_path / "g.nc", lon, lat))
    out = target.coordinates().assign(value=(target.dims, np.arange(48.0).reshape(6, 8), target.data_attributes))
    out.to_netcdf(tmp_path / "out.nc")
    with xr.open_dataset(tmp_path / "out.nc") as back:
        np.testing.assert_array_equal(back.cf["longitude"], lon)
        np.testing.assert_array_equal(back.cf["latitude"], lat)
        assert pyproj.CRS.from_cf(back["crs"].attrs).equals(pyproj.CRS("EPSG:4326"), ignore_axis_order=True)


@pytest.mark.parametrize(
    ("build", "settings_", "words"),
    [
        (lambda p: p.write_text("not a grid"), {}, "cannot be read as NetCDF"),
        (lambda p: xr.Dataset({"a": ("x", [1.0])}).to_netcdf(p), {}, "no longitude with CF attributes"),
        (lambda p: write(p, *rotated()), {"longitude": "lom"}, r'no variable "lom" for longitude; did you mean "lon"\?'),
        (lambda p: write(p, *rotated()), {"mask": "sea"}, 'no variable "sea" for the mask'),
        (lambda p: write(p, *rotated()), {"crs": "EPSG:32626"}, "target.crs = EPSG:32626 is projected"),
        (lambda p: write(p, rotated()[0] * 1e4, rotated()[1]), {}, "expected degrees"),
        (lambda p: write(p, *rotated(), np.zeros((6, 8), "i4")), {}, "no cell is water"),
        (lambda p: write(p, *rotated(), np.full((6, 8), 3), {"long_name": "m"}), {"mask": "wet"}, 'holds 3, expected 0 and 1'),
        (lambda p: write(p, rotated()[0], np.where(np.arange(48).reshape(6, 8) == 20, np.nan, rotated()[1]), np.ones((6, 8))), {}, "1 water cells have no position"),
        (lambda p: write(p, *rotated(), sea=(("k", "m"), np.ones((5, 8)))), {"mask": "sea"}, r"mask \"sea\" has shape .*'k': 5, 'm': 8.*expected the grid's dimensions"),
        (lambda p: in_radians(write(p, *rotated())), {}, '"lon" is in "radian", expected degrees_east'),
        (lambda p: write(p, rotated()[0], rotated()[1], d=(("k",), [1.0])), {"depth": "d"}, r"depth \"d\" is on"),
    ],
)  # fmt: skip
def test_broken_grids_have_one_line(tmp_path, build, settings_, words):
    path = tmp_path / "grid.nc"
    build(path)
    with pytest.raises(TargetError, match=words) as caught:
        read(path, **settings_)
    assert "\n" not in str(caught.value)


def in_radians(path):
    """The same file with its longitudes in another unit."""
    with xr.open_dataset(path) as data:
        data = data.load()
    data["lon"] = np.radians(data["lon"])
    data["lon"].attrs = {"standard_name": "longitude", "units": "radian"}
    data.to_netcdf(path)


def test_a_strongly_sheared_grid(tmp_path):
    """Rows that shift by three cells each: corners stay exact, so that area and points inside are those of the slanted cells."""
    j, i = np.meshgrid(np.arange(6), np.arange(8), indexing="ij")
    lon, lat = -25.0 + 0.05 * (i + 3.0 * j), 0.02 + 0.05 * j  # near the equator a degree is as long both ways
    target = read(write(tmp_path / "g.nc", lon, lat))
    east, north = 0.025 * (np.array([-1, 1, 1, -1]) + 3.0 * np.array([-1, -1, 1, 1])), 0.025 * np.array([-1, -1, 1, 1])
    np.testing.assert_allclose(target.corners[0][20] - lon.flat[20], east, atol=1e-12)
    np.testing.assert_allclose(target.corners[1][20] - lat.flat[20], north, atol=1e-12)
    geod = pyproj.Geod(ellps="WGS84")
    for cell in (0, 20, 47):
        area, _ = geod.polygon_area_perimeter(target.corners[0][cell], target.corners[1][cell])
        assert target.area_m2[cell] == pytest.approx(area, rel=1e-4)
    inside = cell_points(target, np.array([20]), 4, lambda *degrees: np.column_stack(degrees))[0]
    slanted = shapely.Polygon(np.column_stack([c[20] for c in target.corners]))
    assert len(inside) == 16
    assert shapely.contains_xy(slanted, *inside.T).all()
    for side, cells in (("south", np.s_[0]), ("north", np.s_[-1]), ("west", np.s_[:, 0]), ("east", np.s_[:, -1])):
        edge = np.zeros((6, 8), dtype=bool)
        edge[cells] = True
        np.testing.assert_array_equal(target.side_cells[side].reshape(6, 8), edge, err_msg=side)


def test_land_without_positions_does_not_spoil_its_neighbours(tmp_path):
    lon, lat = rotated()
    whole = read(write(tmp_path / "w.nc", lon, lat))
    mask = np.ones(lon.shape, "i4")
    mask[:2, 5:] = 0
    target = read(write(tmp_path / "g.nc", np.where(mask, lon, np.nan), np.where(mask, lat, np.nan), mask))
    wet = target.active
    np.testing.assert_allclose(target.corners[0][wet], whole.corners[0][wet], atol=1e-12)
    np.testing.assert_allclose(
        target.area_m2[wet], whole.area_m2[wet], rtol=1e-6
    )  # the local projection differs a little


def test_folded_cells_are_refused(tmp_path):
    lon, lat = rotated(angle=0.0)
    lon[3, 4] = lon[3, 6] + 0.1  # one centre jumps over its neighbours
    with pytest.raises(TargetError, match="water cells are folded or have no area"):
        read(write(tmp_path / "g.nc", lon, lat))


def staggered(path):
    """Centres and the east sides of cells, each with its own coordinates and mask."""
    lon, lat = np.meshgrid(-25.0 + np.arange(6) * 0.1, 45.0 + np.arange(4) * 0.1)
    sides = ("j", "i_side")
    xr.Dataset(
        {
            "level": (("j", "i"), np.zeros((4, 6)), {"coordinates": "lon lat"}),
            "speed_east": (sides, np.zeros((4, 5)), {"coordinates": "lon_side lat_side"}),
            "wet": (("j", "i"), np.ones((4, 6)), {"standard_name": "sea_binary_mask"}),
            "wet_side": (sides, np.ones((4, 5)), {"standard_name": "sea_binary_mask"}),
            "lon": (("j", "i"), lon, LON), "lat": (("j", "i"), lat, LAT),
            "lon_side": (sides, lon[:, :-1] + 0.05, LON), "lat_side": (sides, lat[:, :-1], LAT),
        }
    ).to_netcdf(path)  # fmt: skip
    return path


def test_a_staggered_grid_by_the_variable_to_fill(tmp_path):
    path = staggered(tmp_path / "s.nc")
    target = read(path, variable="speed_east")
    assert target.dims == ("j", "i_side")
    np.testing.assert_allclose(target.longitude.reshape(4, 5)[0], -24.95 + np.arange(5) * 0.1)
    assert read(path, variable="level").shape == (4, 6)
    with pytest.raises(TargetError, match=r"several variables are longitude .* as target.variable"):
        read(path)
    with pytest.raises(TargetError, match=r'no variable "sped_east" for target\.variable; did you mean "speed_east"'):
        read(path, variable="sped_east")


def test_a_variable_on_no_cells(tmp_path):
    with pytest.raises(ValueError, match="leave out longitude and latitude, or variable"):
        read(staggered(tmp_path / "s.nc"), variable="level", longitude="lon")
