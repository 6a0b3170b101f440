import hashlib
import json

import geopandas
import pandas as pd
import pytest
from shapely.geometry import Point

from texture.output import provenance, write_csv, write_json, write_stations


def stations():
    frame = pd.DataFrame(
        {"id": ["a", "b"], "survey": ["s", "s"], "longitude": [5.1, 5.2], "latitude": [53.0, 53.1],
         "mud": [0.1, 1 / 3], "sand": [0.9, None], "gravel": [0.0, None], "kind": ["sieve", "partial"]}
    )  # fmt: skip
    return geopandas.GeoDataFrame(
        frame, geometry=[Point(*p) for p in zip(frame.longitude, frame.latitude, strict=True)], crs=4326
    )


def test_stations_come_back_and_have_the_same_bytes(tmp_path):
    audit = pd.DataFrame({"file": ["x.csv"], "sheet": [""], "row": [3], "column": ["mud"], "old": ["10,0"], "new": ["0.1"], "rule": ["percent"]})  # fmt: skip
    for name in ("one", "two"):
        (tmp_path / name).mkdir()
        write_stations(tmp_path / name, stations(), audit)
    text = (tmp_path / "one" / "stations.csv").read_text()
    assert text.splitlines()[0] == "id,survey,longitude,latitude,mud,sand,gravel,kind"
    assert text.splitlines()[2] == "b,s,5.2,53.1,0.3333333333333333,,,partial"
    back = geopandas.read_file(tmp_path / "one" / "stations.gpkg")
    assert back.crs.to_epsg() == 4326
    assert back["mud"].tolist() == [0.1, 1 / 3]
    assert (back.geometry.x.tolist(), back.geometry.y.tolist()) == ([5.1, 5.2], [53.0, 53.1])
    for name in ("stations.csv", "stations.gpkg", "audit.csv"):
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes()


def test_csv_has_points_and_line_feeds(tmp_path):
    write_csv(tmp_path / "a.csv", pd.DataFrame({"part": ["mud"], "value": [0.1 + 0.2]}))
    assert (tmp_path / "a.csv").read_bytes() == b"part,value\nmud,0.30000000000000004\n"


def test_provenance_names_inputs_without_places(tmp_path):
    (tmp_path / "data").mkdir()
    (tmp_path / "data" / "survey.csv").write_bytes(b"abc")
    elsewhere = tmp_path.parent / "elsewhere.csv"
    elsewhere.write_bytes(b"")
    record = provenance(
        [tmp_path / "data" / "survey.csv", elsewhere],
        tmp_path,
        counts={"rows_read": 3},
        seconds={"fit": 1.23456},
        seed=7,
    )
    write_json(tmp_path / "provenance.json", record)
    text = (tmp_path / "provenance.json").read_text()
    assert str(tmp_path.parent) not in text
    back = json.loads(text)
    assert back["inputs"][0] == {
        "file": "data/survey.csv",
        "bytes": 3,
        # FIPS 180-4's own example of SHA-256
        "sha256": "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad",
    }
    assert back["inputs"][1]["file"] == "elsewhere.csv"
    assert back["inputs"][1]["sha256"] == hashlib.sha256(b"").hexdigest()
    assert back["seconds"] == {"fit": 1.235}
    assert back["seed"] == 7
    assert back["packages"]["numpy"]


def test_json_refuses_what_json_has_not(tmp_path):
    with pytest.raises(ValueError, match="JSON"):
        write_json(tmp_path / "a.json", {"value": float("nan")})
