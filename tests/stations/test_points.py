"""Layers of points."""

import geopandas as gpd
import pytest

from tests.stations.samples import HEADER, ROWS, recipe_for
from texture.errors import SampleError
from texture.stations import read_samples

NAMES = [HEADER[0], *HEADER[3:]]


@pytest.fixture
def layer():
    values = [[r[0], *r[3:]] for r in ROWS]
    points = gpd.points_from_xy([r[2] for r in ROWS], [r[1] for r in ROWS], crs=4326)
    return gpd.GeoDataFrame(values, columns=NAMES, geometry=points)


@pytest.mark.parametrize(("name", "crs"), [("grabs.gpkg", 4326), ("grabs.geojson", 4326), ("grabs.gpkg", 32631)])
def test_points_and_their_attributes(layer, tmp_path, name, crs):
    layer.to_crs(crs).to_file(tmp_path / name)
    stations = read_samples(recipe_for({"file": tmp_path / name}))
    assert stations.counts["stations"] == 6
    assert stations.table["latitude"].tolist() == pytest.approx([r[1] for r in ROWS], abs=1e-9)
    assert stations.table["mud"].tolist() == pytest.approx([r[3] / 100 for r in ROWS])
    assert any("UTM zone 31N" in note for note in stations.notes) is (crs == 32631)


def test_polygons_are_no_samples(layer, tmp_path):
    layer.set_geometry(layer.to_crs(32631).buffer(10)).to_file(tmp_path / "areas.gpkg")
    with pytest.raises(SampleError, match=r"areas\.gpkg: no layer of points"):
        read_samples(recipe_for({"file": tmp_path / "areas.gpkg"}))


def test_what_only_claims_to_be_a_layer(tmp_path):
    (tmp_path / "grabs.gpkg").write_bytes(b"no layer at all")
    with pytest.raises(SampleError, match=r"grabs\.gpkg: not a readable layer of points"):
        read_samples(recipe_for({"file": tmp_path / "grabs.gpkg"}))


def test_a_shapefile_needs_what_lies_beside_it(layer, tmp_path):
    layer.rename(columns={n: n[:8] for n in NAMES}).to_file(tmp_path / "grabs.shp")
    assert read_samples(recipe_for({"file": tmp_path / "grabs.shp"})).counts["stations"] == 6
    (tmp_path / "grabs.shx").unlink()
    with pytest.raises(SampleError, match=r"grabs\.shp: not a readable layer .* needs its \.shx and \.dbf files"):
        read_samples(recipe_for({"file": tmp_path / "grabs.shp"}))
