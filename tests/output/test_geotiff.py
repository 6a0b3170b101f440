import shutil
import subprocess
from dataclasses import replace

import numpy as np
import pyproj
import pytest
import rasterio

from texture.errors import OutputError
from texture.output import pixel_grid, write_geotiff, write_geotiffs
from texture.output.geotiff import NODATA
from texture.targets.corners import OwnCorners

from .conftest import (
    CLASS_COLOURS,
    CLASS_WORDS,
    COLUMNS,
    NORTH,
    ROWS,
    SIZE,
    WEST,
    make_curvilinear,
    make_estimate,
    make_raster,
)

PARTS = ("mud", "sand", "gravel")


def write_all(folder, target, **settings):
    estimate = make_estimate(target)
    write_geotiffs(folder, estimate, target, PARTS, CLASS_WORDS, CLASS_COLOURS, **settings)
    return estimate


def test_one_file_for_each_part_and_statistic(tmp_path):
    write_all(tmp_path / "geotiff", make_raster())
    expected = {f"{p}_fraction{s}.tif" for p in PARTS for s in ("", "_q05", "_q50", "_q95")}
    expected |= {"texture_class.tif", "texture_class_probability.tif", "evidence.tif"}
    assert {p.name for p in (tmp_path / "geotiff").iterdir()} == expected


def test_a_raster_target_is_written_cell_by_cell(tmp_path):
    target = make_raster()
    estimate = write_all(tmp_path, target)
    with rasterio.open(tmp_path / "mud_fraction.tif") as image:
        assert image.shape == (ROWS, COLUMNS)
        assert pyproj.CRS.from_wkt(image.crs.to_wkt()) == target.crs
        assert image.nodata == NODATA
        assert image.descriptions == ("expected fraction of mud",)
        assert image.xy(0, 0) == (WEST + SIZE / 2, NORTH - SIZE / 2)  # the first cell's centre
        values = image.read(1, masked=True)
        expected = estimate.fractions[:, 0].reshape(ROWS, COLUMNS).astype(np.float32)
        np.testing.assert_array_equal(values.filled(np.nan), expected)
        (at,) = image.sample([(WEST + 10.5 * SIZE, NORTH - 3.5 * SIZE)])
        assert at[0] == expected[3, 10]
        assert "resampled" not in image.tags()


def test_class_map_has_words_and_our_colours(tmp_path):
    estimate = write_all(tmp_path, make_raster())
    with rasterio.open(tmp_path / "texture_class.tif") as image:
        np.testing.assert_array_equal(image.read(1).ravel(), estimate.texture_class)
        assert image.nodata == 0
        assert image.colormap(1)[2] == (*CLASS_COLOURS[2], 255)
        assert image.tags()["value_2"] == "sandy mud"


def test_a_curvilinear_target_is_resampled_and_says_so(tmp_path):
    target = make_curvilinear()
    estimate = write_all(tmp_path, target, cell_size_m=50.0)
    with rasterio.open(tmp_path / "sand_fraction.tif") as image:
        assert image.res == (50.0, 50.0)
        assert image.crs.to_epsg() == 32633
        assert "each pixel of 50 m shows the cell" in image.tags()["resampled"]
        assert "resampled from a curvilinear grid" in image.descriptions[0]
        x, y = pyproj.Transformer.from_crs(4326, 32633, always_xy=True).transform(target.longitude, target.latitude)
        sampled = np.array([v[0] for v in image.sample(zip(x, y, strict=True))])
        wet = target.active
        # a cell's centre is at most half a pixel's diagonal from the pixel's centre, well inside the cell
        np.testing.assert_array_equal(sampled[wet], estimate.fractions[wet, 1].astype(np.float32))
        assert (sampled[~wet] == NODATA).all()
        outside = [(x.min() - 400.0, y.max() + 400.0), (x.max(), y.min())]
        assert [v[0] for v in image.sample(outside)] == [NODATA, NODATA]
        image_area = (image.read(1) != NODATA).sum() * 50.0**2
    assert image_area == pytest.approx(wet.sum() * SIZE**2, rel=0.02)


def test_default_pixels_are_as_large_as_the_cells():
    grid = pixel_grid(make_curvilinear())
    assert grid.transform[0] == SIZE  # to two digits


def test_polar_grids_get_a_polar_projection():
    target = make_curvilinear()
    moved = replace(
        target, latitude=target.latitude + 37.0, corners=OwnCorners(target.corners[0], target.corners[1] + 37.0)
    )
    grid = pixel_grid(moved, 200.0)
    assert grid.crs.to_epsg() == 3995
    assert (grid.cell >= 0).any()


def test_pixels_too_small_are_refused():
    with pytest.raises(OutputError, match=r"too many; give a larger outputs.geotiff_cell_size_m"):
        pixel_grid(make_curvilinear(), 0.1)


def test_layout_is_cloud_optimised(tmp_path):
    """Tiles, overviews and the driver's own mark; a large image, since small ones need no overview."""
    target = make_curvilinear()
    grid = pixel_grid(target, 3.0)
    write_geotiff(tmp_path / "mud.tif", grid, make_estimate(target).fractions[:, 0], "mud", units="1")
    with rasterio.open(tmp_path / "mud.tif") as image:
        assert max(image.shape) > 512
        assert image.block_shapes == [(256, 256)]
        assert image.profile["tiled"]
        assert image.compression.value == "DEFLATE"
        assert image.overviews(1)[0] == 2
        assert image.tags(ns="IMAGE_STRUCTURE")["LAYOUT"] == "COG"
        assert image.units == ("1",)


def test_the_same_map_gives_the_same_bytes(tmp_path):
    for name in ("one", "two"):
        write_all(tmp_path / name, make_curvilinear())
    for path in (tmp_path / "one").iterdir():
        assert path.read_bytes() == (tmp_path / "two" / path.name).read_bytes()


@pytest.mark.tools
@pytest.mark.skipif(shutil.which("gdalinfo") is None, reason="gdalinfo is not installed (Debian package gdal-bin)")
def test_gdalinfo_reads_it(tmp_path):
    write_all(tmp_path, make_raster())
    done = subprocess.run(["gdalinfo", str(tmp_path / "mud_fraction.tif")], capture_output=True, text=True, check=True)
    assert "LAYOUT=COG" in done.stdout
    assert f"Origin = ({WEST:.15f},{NORTH:.15f})" in done.stdout
