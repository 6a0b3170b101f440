"""Waves and currents of the user's on the target's cells."""

import numpy as np
import pytest
import rasterio
import xarray as xr

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets import read_target
from texture.targets.fields import SPEED, TIME, read_field

TARGET = read_target(
    TargetSettings(bounds=(500_000.0, 4_900_000.0, 506_000.0, 4_904_000.0), cell_size=1000.0, crs="EPSG:32626")
)
VALUES = np.arange(24.0).reshape(4, 6)


def waves(path, values=VALUES, dims=("y", "x"), **attributes):
    xr.Dataset({"swell": (dims, values, {"units": "m s-1"} | attributes)}).to_netcdf(path)
    return path


def test_numbers_variables_and_units(tmp_path):
    assert read_field(0.2, None, TARGET, "current_m_s", SPEED).tolist() == [0.2] * 24
    path = waves(tmp_path / "waves.nc", VALUES[None], ("time", "y", "x"), units="cm s-1")
    np.testing.assert_allclose(read_field("swell", path, TARGET, "orbital_velocity_m_s", SPEED), VALUES.ravel() / 100)
    path = waves(tmp_path / "turned.nc", VALUES.T, ("x", "y"))
    np.testing.assert_array_equal(read_field("swell", path, TARGET, "orbital_velocity_m_s", SPEED), VALUES.ravel())


def test_a_geotiff_is_read_under_each_centre(tmp_path):
    pixels = np.arange(8.0, dtype=np.float32).reshape(2, 4)  # 2 km pixels, not in step with the cells
    pixels[0, 0] = -1.0
    transform = rasterio.Affine(2000.0, 0.0, 499_700.0, 0.0, -2000.0, 4_904_000.0)
    with rasterio.open(
        tmp_path / "waves.tif", "w", driver="GTiff", height=2, width=4, count=1, dtype="float32", crs="EPSG:32626",
        transform=transform, nodata=-1.0,
    ) as image:  # fmt: skip
        image.write(pixels, 1)
    found = read_field(tmp_path / "waves.tif", None, TARGET, "orbital_velocity_m_s", SPEED).reshape(4, 6)
    nan = np.nan
    # Centres at 500.5, 501.5, … km; pixels begin at 499.7, 501.7, 503.7 km.
    np.testing.assert_array_equal(found[0], [nan, nan, 1, 1, 2, 2])
    np.testing.assert_array_equal(found[2], [4, 4, 5, 5, 6, 6])


@pytest.mark.parametrize(
    ("name", "change", "message"),
    [
        ("swel", {}, r'waves.nc: no variable "swel" for period_s; did you mean "swell"'),
        ("swell", {"units": "feet"}, r'waves.nc: "swell" is in "feet", expected s for period_s'),
        ("swell", {"units": ""}, r'"swell" does not say its units, expected s for period_s'),
        ("swell", {"units": "s", "values": VALUES[:3]}, r'"swell" has shape .*, expected one value for each cell'),
        ("swell", {"units": "s", "values": VALUES * np.nan}, r'"swell": has no value on any water cell'),
    ],
)
def test_files_that_do_not_fit(tmp_path, name, change, message):
    with pytest.raises(TargetError, match=message):
        read_field(name, waves(tmp_path / "waves.nc", **change), TARGET, "period_s", TIME)


def test_files_that_are_none(tmp_path):
    (tmp_path / "waves.nc").write_text("words")
    with pytest.raises(TargetError, match=r"waves.nc: cannot be read as NetCDF"):
        read_field("swell", tmp_path / "waves.nc", TARGET, "period_s", TIME)
    (tmp_path / "waves.tif").write_text("words")
    with pytest.raises(TargetError, match=r"waves.tif: cannot be read as a GeoTIFF"):
        read_field(tmp_path / "waves.tif", None, TARGET, "period_s", TIME)


def test_series_in_time(tmp_path):
    path = waves(tmp_path / "waves.nc", np.stack([VALUES, 2 * VALUES], axis=-1), ("y", "x", "hour"))
    found = read_field("swell", path, TARGET, "orbital_velocity_m_s", SPEED, series=True)
    np.testing.assert_array_equal(found, [VALUES.ravel(), 2 * VALUES.ravel()])
    path = waves(tmp_path / "buoy.nc", np.array([0.1, 0.2, 0.3]), ("hour",))
    found = read_field("swell", path, TARGET, "orbital_velocity_m_s", SPEED, series=True)
    assert found.shape == (3, 24)
    assert found[1].tolist() == [0.2] * 24
    with pytest.raises(TargetError, match="choose one time, or put it on the target's cells"):
        read_field("swell", path, TARGET, "depth_m", SPEED)
