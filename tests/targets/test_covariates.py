"""Covariates from files: a GeoTIFF in another CRS, NetCDF on its own coordinates or on the target's cells, and mistakes."""

from __future__ import annotations

import numpy as np
import pyproj
import pytest
import rasterio
import xarray as xr
from rasterio import Affine

from texture.errors import TargetError
from texture.recipe import Covariate, TargetSettings
from texture.targets import read_target
from texture.targets.covariates import read_covariate, target_depth

UTM = pyproj.CRS.from_epsg(32626)
TO_UTM = pyproj.Transformer.from_crs(4326, UTM, always_xy=True)
PLACES = np.array([[503_100.0, 4_902_900.0], [508_000.0, 4_901_300.0]])


def to_plane(lon, lat):
    return np.column_stack(TO_UTM.transform(lon, lat))


def from_plane(points):
    return TO_UTM.transform(points[:, 0], points[:, 1], direction="INVERSE")


@pytest.fixture
def target(tmp_path):
    return read_target(
        TargetSettings(bounds=(500_000.0, 4_900_000.0, 510_000.0, 4_906_000.0), cell_size=1_000.0, crs="EPSG:32626")
    )


def read(target, path, **more):
    return read_covariate(Covariate(name="slope", file=path, **more), target, PLACES, to_plane, from_plane)


def linear(lon, lat):
    """A field that bilinear interpolation in degrees holds exactly."""
    return 100.0 * (lon + 27.0) + 10.0 * (lat - 44.0)


def test_a_geotiff_in_another_crs_is_bilinear_and_respects_nodata(tmp_path, target):
    west, north, step = -27.2, 44.6, 0.01
    lon, lat = west + step * (np.arange(60) + 0.5), north - step * (np.arange(60) + 0.5)
    values = linear(lon[None], lat[:, None]).astype(np.float32)
    path = tmp_path / "slope.tif"
    with rasterio.open(
        path, "w", driver="GTiff", width=60, height=60, count=1, dtype="float32", crs="EPSG:4326", nodata=-99.0,
        transform=Affine(step, 0.0, west, 0.0, -step, north),
    ) as image:  # fmt: skip
        holed = values.copy()
        holed[lat < 44.26] = -99.0
        image.write(holed, 1)
    found, state = read(target, path).at(PLACES)
    expected = linear(*from_plane(PLACES))
    assert found[0] == pytest.approx(expected[0], abs=2e-4)  # float32
    assert state.tolist() == [0, 1]  # the second lies beside the hole: the nearest row of values serves
    assert found[1] == pytest.approx(expected[1], abs=0.2)


@pytest.mark.parametrize("flat", [True, False])
def test_netcdf_on_coordinates_of_its_own(tmp_path, target, flat):
    lon, lat = np.linspace(-27.1, -26.8, 61), np.linspace(44.2, 44.4, 41)
    units = [{"units": "degrees_east"}, {"units": "degrees_north"}]
    mesh = np.meshgrid(lon, lat)
    if flat:
        data = xr.Dataset(
            {"slope": (("lon", "lat"), linear(*mesh).T)}, {"lon": ("lon", lon, units[0]), "lat": ("lat", lat, units[1])}
        )
    else:
        both = ("j", "i")
        data = xr.Dataset(
            {
                "slope": (both, linear(*mesh)),
                "longitude": (both, mesh[0], units[0]),
                "latitude": (both, mesh[1], units[1]),
            }
        )
    data.to_netcdf(tmp_path / "slope.nc")
    found, state = read(target, tmp_path / "slope.nc", **({} if flat else {"variable": "slope"})).at(PLACES)
    assert state.tolist() == [0, 0]
    np.testing.assert_allclose(found, linear(*from_plane(PLACES)), atol=1e-9 if flat else 0.3)


def test_netcdf_on_the_targets_own_cells(tmp_path, target):
    values = np.add.outer(np.arange(6.0), 10.0 * np.arange(10.0))  # rows from the north
    xr.Dataset({"slope": (("y", "x"), values)}).to_netcdf(tmp_path / "slope.nc")
    found, _ = read(target, tmp_path / "slope.nc").at(PLACES)
    # The first place lies 2.6 cells from the first column's centre and 2.6 rows from the first row's, the second 7.5 and 4.2.
    np.testing.assert_allclose(found, [26.0 + 2.6, 75.0 + 4.2], atol=1e-6)


def test_several_variables_have_to_be_chosen_from(tmp_path, target):
    cells = (("y", "x"), np.ones((6, 10)))
    xr.Dataset({"slope": cells, "speed": cells}).to_netcdf(tmp_path / "two.nc")
    with pytest.raises(TargetError, match=r"two.nc: has 2 variables \(slope, speed\), expected one"):
        read(target, tmp_path / "two.nc")
    with pytest.raises(TargetError, match=r'no variable "slop" .* did you mean "slope"'):
        read(target, tmp_path / "two.nc", variable="slop")
    xr.Dataset({"slope": (("y", "x"), np.ones((3, 3)))}).to_netcdf(tmp_path / "other.nc")
    with pytest.raises(TargetError, match=r"other\.nc.*no coordinates by CF attributes"):
        read(target, tmp_path / "other.nc")


def test_a_target_without_depth_gives_none(target):
    with pytest.raises(TargetError, match=r'covariate "depth".*has no depth; give a file'):
        target_depth(target, to_plane, from_plane)
