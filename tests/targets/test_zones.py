"""Where zones lie."""

import numpy as np
import pyproj
import pytest
import shapely
from shapely.geometry import Polygon

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets import read_target
from texture.targets.zones import inside, numbered_area, way_in_m


def test_the_way_in_is_that_of_the_ellipsoid():
    """Outside check: pyproj.Geod along the parallel."""
    area = Polygon([(3.0, 55.0), (3.2, 55.0), (3.2, 55.2), (3.0, 55.2)])
    lon, lat = np.array([3.01, 2.99, 3.1, 3.01]), np.array([55.1, 55.1, 55.1, 55.1])
    expected = pyproj.Geod(ellps="WGS84").inv(3.0, 55.1, 3.01, 55.1)[2]
    way = way_in_m(area, lon, lat, 2_000.0)
    np.testing.assert_allclose(way[[0, 1, 3]], [expected, -expected, expected], rtol=1e-3)
    assert way[2] == np.inf
    assert inside(area, lon + 360.0, lat).tolist() == [True, False, True, True]


def test_cells_by_number(tmp_path):
    import xarray as xr

    lon, lat = np.meshgrid(179.0 + np.arange(4) * 0.5, 50.0 + np.arange(3) * 0.5)  # across the date line
    zone = np.array([[1, 1, 2, 2]] * 3)
    attrs = {"standard_name": "longitude", "units": "degrees_east"}
    grid = xr.Dataset(
        {"zone": (("j", "i"), zone), "sea": (("j", "i"), np.ones((3, 4), dtype=np.int8))},
        coords={"lon": (("j", "i"), (lon + 180) % 360 - 180, attrs),
                "lat": (("j", "i"), lat, {"standard_name": "latitude", "units": "degrees_north"})},
    )  # fmt: skip
    grid.to_netcdf(tmp_path / "grid.nc")
    target = read_target(TargetSettings(file=tmp_path / "grid.nc", mask="sea"))
    area = numbered_area(tmp_path / "grid.nc", "zone", (2,), target, "zones")
    assert inside(area, target.longitude, target.latitude).reshape(3, 4).tolist() == [[False, False, True, True]] * 3
    assert shapely.get_num_geometries(area) == 1
    with pytest.raises(TargetError, match=r'no water cell has "zone" = \[7\]; it has 1, 2'):
        numbered_area(tmp_path / "grid.nc", "zone", (7,), target, "zones")
    with pytest.raises(TargetError, match='no variable "zoone"'):
        numbered_area(tmp_path / "grid.nc", "zoone", (2,), target, "zones")
