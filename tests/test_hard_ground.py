"""Hard ground: from stations, from polygons, through a run."""

import geopandas
import numpy as np
import pytest
import rasterio
import xarray as xr
from shapely.geometry import box

from texture import build
from texture.hard_ground import hard_ground_probability, indicator_map
from texture.pipeline import validate

QUICK = {"validation": {"count": 3, "compare": []}, "composition": {"zeros": "replace"}}


def test_an_indicator_between_two_camps():
    """At the stations it is what they found; half way between two camps of one size it is a half."""
    rng = np.random.default_rng(3)
    camp = rng.uniform(0.0, 400.0, (40, 2))
    mirrored = np.column_stack([2_000.0 - camp[:, 0], camp[:, 1]])
    points, indicator = np.vstack([camp, mirrored]), np.repeat([1.0, 0.0], 40)
    predict = indicator_map(points, indicator)
    np.testing.assert_allclose(predict(points), indicator, atol=0.02)
    between = predict(np.array([[1_000.0, 200.0], [900.0, 200.0], [1_100.0, 200.0]]))
    assert between[1] >= between[0] >= between[2]
    assert between[1] + between[2] == pytest.approx(1.0, abs=0.15)


def test_a_zone_of_two_stations_takes_their_mean():
    predict = indicator_map(np.array([[0.0, 0.0], [500.0, 0.0]]), np.array([1.0, 0.0]))
    np.testing.assert_array_equal(predict(np.array([[0.0, 0.0], [9_000.0, 0.0]])), 0.5)


def test_rows_without_a_sample_and_a_polygon(small, tmp_path):
    table = small.parent / "grabs.csv"
    lines = table.read_text().splitlines()
    rock = [f"R{i},{509_000 + 100 * (i % 3):d},{4_905_000 + 100 * (i // 3):d},,,,rock; no sample" for i in range(9)]
    table.write_text("\n".join([lines[0] + ",remarks", *(s + "," for s in lines[1:]), *rock]) + "\n")
    geopandas.GeoDataFrame(geometry=[box(500_000, 4_900_000, 501_000, 4_901_000)], crs="EPSG:32626").to_file(
        tmp_path / "rock.gpkg"
    )
    bed = {"hard_ground": str(tmp_path / "rock.gpkg"), "minimum_thickness_m": 0.001}
    result = build(small, output=tmp_path / "out", bed=bed, rim=None, **QUICK)
    assert len(result.found.stations.hard_ground) == 9
    p = result.bed.hard_ground_probability.reshape(12, 20)
    assert (p[-2:, :2] == 1.0).all()  # rows run north to south
    assert p[1, 18] > 0.5
    assert p[6, 5] < 0.1
    thickness = result.bed.erodible_thickness[0].reshape(12, 20)
    assert thickness[1, 18] == thickness[-1, 0] == 0.001
    assert thickness[6, 5] == 0.1
    np.testing.assert_allclose(result.bed.class_fraction.sum(axis=0), 1.0, atol=1e-12)
    for name in ("texture.nc", "bed.nc"):
        with xr.open_dataset(tmp_path / "out" / name) as data:
            np.testing.assert_array_equal(data["hard_ground_probability"].values, p)
    with rasterio.open(tmp_path / "out" / "geotiff" / "hard_ground_probability.tif") as image:
        np.testing.assert_allclose(image.read(1), p, rtol=1e-6)
    assert any("cannot erode" in line for line in result.summary_lines())


def test_all_of_it_hard(small, tmp_path):
    geopandas.GeoDataFrame(geometry=[box(4e5, 4.8e6, 6e5, 5e6)], crs="EPSG:32626").to_file(tmp_path / "rock.gpkg")
    bed = {"hard_ground": str(tmp_path / "rock.gpkg")}
    result = build(small, output=tmp_path / "out", bed=bed, outputs={"geotiff": False}, rim=None, **QUICK)
    assert (result.bed.erodible_thickness == 0.0).all()
    assert result.bed.account.share_below_samples == 0.0


def test_hard_ground_fades_across_a_soft_edge(small, tmp_path):
    """Stations of a zone in the east found rock: across its soft edge the map of its own stations fades into that of all."""
    table = small.parent / "grabs.csv"
    lines = table.read_text().splitlines()
    rock = [f"R{i},{508_000 + 150 * (i % 10):d},{4_900_500 + 1_000 * (i // 2):d},,,,rock; no sample" for i in range(10)]
    table.write_text("\n".join([lines[0] + ",remarks", *(s + "," for s in lines[1:]), *rock]) + "\n")
    east = box(507_000, 4_880_000, 530_000, 4_930_000)
    geopandas.GeoDataFrame(geometry=[east], crs="EPSG:32626").to_file(tmp_path / "east.gpkg")
    zone = {"name": "east", "polygons": str(tmp_path / "east.gpkg"), "soft_edge_m": 4_000.0}
    found = validate(small, output=tmp_path / "out", zones=[zone], **QUICK)
    p, zones, target = hard_ground_probability(found), found.mapper.zones, found.target
    rows = np.concatenate([np.flatnonzero(found.stations.table["kind"] == "hard_ground"), found.observations.rows])
    table = found.stations.table.iloc[rows]
    here = found.plane.to_metres(table["longitude"].to_numpy(), table["latitude"].to_numpy())
    hard = (table["kind"] == "hard_ground").to_numpy(dtype=float)
    place = found.plane.to_metres(target.longitude, target.latitude)
    around = indicator_map(here, hard)(place)
    own = indicator_map(here[zones.heard(1, rows)], hard[zones.heard(1, rows)])(place)
    inside, w = zones.cells.zone == 1, zones.cells.weight
    assert ((w > 0.05) & (w < 0.95)).sum() > 40
    np.testing.assert_allclose(p, np.where(inside, w * own + (1 - w) * around, around), atol=1e-9)
    # Where the zone has nearly nothing to say yet, its map alone would be far off.
    assert np.abs(own - around)[inside & (w < 0.5)].max() > 0.1
