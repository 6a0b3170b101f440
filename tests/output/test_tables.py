import hashlib
import json

import pandas as pd
import pytest

from texture.output import provenance, write_csv, write_json


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
