"""Small targets whose answers can be counted on the fingers."""

import numpy as np
import pyproj
import pytest

from texture.targets import Target
from texture.targets.corners import OwnCorners
from texture.targets.structured import Structured


def make_target(active, size_m=100.0, **settings):
    """Return a raster of square cells in a metric projection from a 2-D mask, rows north to south."""
    active = np.asarray(active, dtype=bool)
    rows, columns = active.shape
    x = 500_000.0 + (np.arange(columns) + 0.5) * size_m
    y = 5_000_000.0 - (np.arange(rows) + 0.5) * size_m
    to_degrees = pyproj.Transformer.from_crs(32633, 4326, always_xy=True)

    def degrees(dx, dy):
        lon, lat = to_degrees.transform(*np.meshgrid(x + dx * size_m / 2, y + dy * size_m / 2))
        return lon.ravel(), lat.ravel()

    corners = [degrees(dx, dy) for dx, dy in [(-1, -1), (1, -1), (1, 1), (-1, 1)]]
    longitude, latitude = degrees(0, 0)
    return Target(
        kind="raster",
        name="little grid",
        dims=("y", "x"),
        shape=active.shape,
        crs=pyproj.CRS.from_epsg(32633),
        longitude=longitude,
        latitude=latitude,
        corners=OwnCorners(np.stack([c[0] for c in corners], axis=1), np.stack([c[1] for c in corners], axis=1)),
        active=active.ravel(),
        topology=Structured(active.shape),
        x=x,
        y=y,
        **settings,
    )


@pytest.fixture
def target_of():
    return make_target
