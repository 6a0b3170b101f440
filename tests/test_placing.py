"""Stations on land, off the grid, and nowhere near it."""

import numpy as np
import pytest

from texture.errors import SampleError
from texture.placing import place_stations
from texture.recipe import Intake, Recipe
from texture.stations import read_samples
from texture.targets import read_target

BOUNDS = (500_000.0, 4_900_000.0, 510_000.0, 4_904_000.0)


@pytest.fixture
def scene(tmp_path):
    """A raster of 1 km cells whose western half is land, and stations at given eastings."""
    import geopandas
    import shapely

    land = geopandas.GeoDataFrame(geometry=[shapely.box(490_000, 4_890_000, 505_000, 4_910_000)], crs=32626)
    land.to_crs(4326).to_file(tmp_path / "land.geojson")

    def make(eastings, northing=4_902_500.0, **target):
        rows = [f"S{i},{x},{northing},0.2,0.7,0.1" for i, x in enumerate(eastings)]
        (tmp_path / "a.csv").write_text("id,easting,northing,mud,sand,gravel\n" + "\n".join(rows) + "\n")
        settings = {"bounds": BOUNDS, "cell_size": 1000.0, "crs": "EPSG:32626", "land": tmp_path / "land.geojson"}
        recipe = Recipe.model_validate(
            {
                "samples": [{"file": tmp_path / "a.csv", "crs": "EPSG:32626", "unit": "fraction"}],
                "target": settings | target,
            }
        )
        return read_samples(recipe), read_target(recipe.target)

    return make


EASTINGS = [504_700.0, 501_500.0, 506_000.0, 507_000.0, 508_000.0, 509_000.0, 512_000.0]


def test_snap_moves_one_within_a_cell_and_sets_the_other_aside(scene):
    stations, target = scene(EASTINGS)
    placed = place_stations(stations, target, Intake())
    assert placed.table["id"].tolist() == ["S0", "S2", "S3", "S4", "S5", "S6"]
    moved = placed.table.iloc[0]
    wet = np.flatnonzero(target.active)
    assert (moved["longitude"], moved["latitude"]) in set(zip(target.longitude[wet], target.latitude[wet], strict=True))
    assert placed.set_aside["reason"].tolist() == ["on land, further than one cell from water"]
    assert set(placed.audit["rule"]) == {"on land: moved to the nearest water cell, which is within one cell"}
    assert placed.counts["rows_read"] == stations.counts["rows_read"]
    assert stations.table["id"].tolist()[1] == "S1"  # the stations given are not edited


def test_drop_and_keep(scene):
    stations, target = scene(EASTINGS)
    assert place_stations(stations, target, Intake(on_land="drop")).set_aside["id"].tolist() == ["S0", "S1"]
    assert place_stations(stations, target, Intake(on_land="keep")) is stations


def test_without_polygons_the_dry_cells_are_land(scene, tmp_path):
    stations, target = scene(EASTINGS)
    from dataclasses import replace

    bare = replace(target, land=None)
    placed = place_stations(stations, bare, Intake(on_land="drop"))
    assert placed.set_aside["id"].tolist() == ["S0", "S1"]
    assert "S6" in placed.table["id"].tolist()  # outside the grid, in no cell at all


def test_no_overlap_is_refused_with_both_extents(scene):
    stations, target = scene([x + 80_000 for x in EASTINGS])
    with pytest.raises(
        SampleError, match=r"none of 7 stations lies on the grid: stations are at longitude -25\.\d+"
    ) as caught:
        place_stations(stations, target, Intake())
    assert "check the samples' crs" in str(caught.value)
