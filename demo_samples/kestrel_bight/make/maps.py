"""The depth raster and the land outline."""

import json
from pathlib import Path
from typing import Final

import numpy as np
import rasterio
import shapely

from demo_samples.kestrel_bight.make import place

_CELL_M: Final = 500.0
_WEST_M, _SOUTH_M, _EAST_M, _NORTH_M = 502_000.0, 4_870_000.0, 574_000.0, 4_926_000.0
_NODATA: Final = -9999.0


def write_depth(path: Path) -> None:
    """Write depth below mean sea level, positive down, as a GeoTIFF in UTM; land is nodata."""
    columns, rows = round((_EAST_M - _WEST_M) / _CELL_M), round((_NORTH_M - _SOUTH_M) / _CELL_M)
    easting = _WEST_M + (np.arange(columns) + 0.5) * _CELL_M
    northing = _NORTH_M - (np.arange(rows) + 0.5) * _CELL_M
    s, t = place.utm_to_frame(*np.meshgrid(easting, northing))
    depth = np.where(place.on_land(s, t), _NODATA, np.round(place.frame_depth_m(s, t), 2)).astype(np.float32)
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        width=columns,
        height=rows,
        count=1,
        dtype="float32",
        crs=place.UTM,
        transform=rasterio.Affine(_CELL_M, 0.0, _WEST_M, 0.0, -_CELL_M, _NORTH_M),
        nodata=_NODATA,
    ) as raster:
        raster.write(depth, 1)
        raster.set_band_description(1, "depth below mean sea level, m, positive down")


def write_coast(path: Path) -> None:
    """Write mainland and island as GeoJSON polygons (WGS 84, 1e-6 degrees)."""
    # Only the land near the map: the frame's mainland runs on far beyond it.
    near = shapely.intersection(place.land(), shapely.box(-45.0, -40.0, 45.0, 34.0))
    parts = sorted(near.geoms, key=lambda part: -part.area)
    features = []
    for name, part in zip(("mainland", "island"), parts, strict=True):
        ring = shapely.get_coordinates(shapely.geometry.polygon.orient(part).exterior)
        longitude, latitude = place.to_degrees(ring[:, 0], ring[:, 1])
        points = [[round(float(x), 6), round(float(y), 6)] for x, y in zip(longitude, latitude, strict=True)]
        geometry = {"type": "Polygon", "coordinates": [points]}
        features.append({"type": "Feature", "properties": {"name": name}, "geometry": geometry})
    text = ",\n".join(json.dumps(feature) for feature in features)
    path.write_text(f'{{"type": "FeatureCollection", "features": [\n{text}\n]}}\n', encoding="utf-8")
