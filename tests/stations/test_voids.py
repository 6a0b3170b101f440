"""Samples older than a change of the bed are set aside inside its polygon."""

import geopandas as gpd
import pytest
import shapely
from pydantic import ValidationError

from tests.stations.test_ages import DATED
from texture.errors import SampleError

BOX = [[3.2, 54.1], [3.22, 54.1], [3.22, 54.12], [3.2, 54.12]]  # around A1 and A2


def test_samples_older_than_a_dredging_are_set_aside_inside_its_polygon(read):
    more = [["A7", 54.2, 3.3, 10, 90, 0, "", "1980-01-01"], ["A8", 54.11, 3.21, 10, 90, 0, "", ""]]
    void = {"polygon": BOX, "date": "2000-06-01", "reason": "dredging of the channel"}
    stations = read([*DATED, *more], intake={"void": [void]})
    assert stations.set_aside["id"].tolist() == ["A1"]  # A2 lies inside too, but was taken later
    assert stations.set_aside["reason"][0] == "older than the dredging of the channel of 2000-06-01 at its place"
    assert any(note.startswith("1 samples without a date lie where there was dredging") for note in stations.notes)


def test_a_polygon_without_samples_is_said(read):
    far = {"polygon": [[10, 10], [11, 10], [11, 11]], "date": "2000-06-01"}
    assert any("check its polygon" in note for note in read(DATED, intake={"void": [far]}).notes)
    with pytest.raises(ValidationError, match="at least 3 items"):
        read(DATED, intake={"void": [{"polygon": BOX[:2], "date": "2000-06-01"}]})
    with pytest.raises(ValidationError, match="give either polygon or file"):
        read(DATED, intake={"void": [{"date": "2000-06-01"}]})
    with pytest.raises(ValidationError, match="a polygon needs its date"):
        read(DATED, intake={"void": [{"polygon": BOX}]})


def layer(path, **attributes):
    """Two boxes in metres of a projection, around A1 and A2, and around A3."""
    boxes = [shapely.box(3.2, 54.1, 3.22, 54.12), shapely.box(3.222, 54.122, 3.224, 54.124)]
    gpd.GeoDataFrame(attributes, geometry=boxes, crs=4326).to_crs(32631).to_file(path)
    return path


def test_polygons_of_a_file_with_a_day_each(read, tmp_path):
    path = layer(tmp_path / "dredged.gpkg", Date=["2000-06-01", "1994-01-01"])
    stations = read(DATED, intake={"void": [{"file": path, "reason": "disposal"}]})
    assert stations.set_aside["id"].tolist() == ["A1"]  # A3 was taken on the day of its own change
    more = [["A7", 54.2, 3.3, 10, 90, 0, "", "1980-01-01"], ["A8", 54.3, 3.4, 10, 90, 0, "", "1980-01-01"]]
    later = read([*DATED, *more], intake={"void": [{"file": path, "date": "2020-01-01"}]})
    assert later.set_aside["id"].tolist() == ["A1", "A2", "A3"]


def test_files_that_tell_no_day_or_no_area(read, tmp_path):
    path = layer(tmp_path / "works.geojson", year=["2000", "soon"])
    with pytest.raises(
        SampleError, match=r'works.geojson: no attribute "date" .* attributes there: year; give date or'
    ):
        read(DATED, intake={"void": [{"file": path}]})
    with pytest.raises(SampleError, match=r'works.geojson, polygon 2: "year" is "soon", expected a day such as'):
        read(DATED, intake={"void": [{"file": path, "date_attribute": "year"}]})
    points = tmp_path / "points.geojson"
    gpd.GeoDataFrame({"date": ["2000"]}, geometry=[shapely.Point(3.2, 54.1)], crs=4326).to_file(points)
    with pytest.raises(SampleError, match=r"points\.geojson: found Point, expected polygons"):
        read(DATED, intake={"void": [{"file": points}]})
    (tmp_path / "none.geojson").write_text("no")
    with pytest.raises(SampleError, match=r"none\.geojson: not a readable layer of polygons"):
        read(DATED, intake={"void": [{"file": tmp_path / "none.geojson"}]})
