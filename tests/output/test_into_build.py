"""From the recipe to the model's own initial file, through `texture.build`."""

import tomllib

import netCDF4
import numpy as np
import pandas as pd
import pytest
import tomli_w

from texture import build
from texture.errors import RecipeError

from .test_into import dump

NAMES = """
[dimensions]
layer = "strat"
y = "j"
x = "i"
[variables]
class_fraction = { name = "share_{class}", split = "class", order = ["layer", "y", "x"] }
erodible_thickness = { name = "bed_height" }
"""
ROWS, COLUMNS = 12, 20
QUICK = {"validation": {"count": 2, "compare": []}}


def initial_file(path, rows=ROWS, kind="f4", columns=COLUMNS):
    """An initial file of an invented model: packed water, unlimited time with two records, a group, odd attributes."""
    rng = np.random.default_rng(4)
    with netCDF4.Dataset(path, "w") as file:
        file.title, file.odd = "first state of the Lantern model", np.int16(7)
        file.createDimension("tick", None)
        for name, length in (("strat", 1), ("j", rows), ("i", columns)):
            file.createDimension(name, length)
        clock = file.createVariable("tick", "f8", ("tick",))
        clock.units, clock[:] = "hours since 2001-01-01", [0.0, 6.0]
        warm = file.createVariable("warmth", "i2", ("tick", "j", "i"), fill_value=-1, zlib=True)
        warm.scale_factor, warm.units = 0.01, "degC"
        warm[:] = rng.uniform(0, 20, (2, rows, columns))
        for name in ("share_mud", "share_sand", "share_gravel"):
            share = file.createVariable(name, kind, ("tick", "strat", "j", "i"), chunksizes=(1, 1, 4, 5), zlib=True)
            share.note = "as delivered"
            share[:] = 0
        file.createVariable("bed_height", "f8", ("strat", "j", "i"), fill_value=-9.0)[:] = 1.0
        file.createGroup("more").createVariable("text", str, ())[...] = "kept"
    return path


@pytest.fixture
def job(small):
    """The small recipe with a names file and an initial file beside it."""
    settings = tomllib.loads(small.read_text()) | QUICK
    settings["outputs"] = {"geotiff": False, "names": "names.toml", "into": "initial.nc", "into_record": 1}
    small.write_text(tomli_w.dumps(settings))
    (small.parent / "names.toml").write_text(NAMES)
    return small


@pytest.mark.slow
def test_the_copy_differs_in_the_bed_alone(job):
    source = initial_file(job.parent / "initial.nc")
    before = source.read_bytes()
    result = build(job)
    copy = job.parent / "out" / "initial.nc"
    assert copy in result.files
    assert source.read_bytes() == before
    old, new = dump(source), dump(copy)
    assert list(old) == list(new)
    assert old.pop(("", "attributes")) == new.pop(("", "attributes"))
    total = np.zeros((1, ROWS, COLUMNS), dtype=np.float32)
    for key, (dtype, dimensions, filters, attributes, values) in old.items():
        assert str((dtype, dimensions, filters, attributes)) == str(new[key][:4]), key
        if key[1].startswith("share_"):
            i = result.bed.classes.names.index(key[1].removeprefix("share_"))
            np.testing.assert_array_equal(new[key][4][0], values[0])
            expected = result.bed.class_fraction[i].reshape(1, ROWS, COLUMNS)
            np.testing.assert_allclose(new[key][4][1], expected, rtol=0, atol=2**-24)
            total += new[key][4][1]
        elif key[1] == "bed_height":
            np.testing.assert_array_equal(new[key][4], np.full((1, ROWS, COLUMNS), 0.1))
        else:
            np.testing.assert_array_equal(new[key][4], values)
    assert (total == np.float32(1.0)).all()  # single precision in their file: still 1 exactly as stored
    record = (job.parent / "out" / "provenance.json").read_text()
    assert '"initial.nc"' in record


@pytest.mark.parametrize(
    ("file", "names", "message"),
    [
        ({"rows": 9}, NAMES, r'initial.nc: "share_mud" has 9 along j, the bed has 12; it was made for another grid'),
        ({"kind": "i2"}, NAMES, r'initial.nc: "share_mud" is stored as int16, which cannot hold fractions'),
        ({}, NAMES.replace("share_{class}", "part_{class}"), r'initial.nc: has no variable "part_mud"'),
        ({}, NAMES.replace('{ name = "bed_height" }', '{ name = "share_mud" }'), 'two variables would be called "share_mud"'),
        ({}, NAMES.replace('["layer", "y", "x"]', '["layer", "y"]'), "expected its own dimensions in some order"),
    ],
)  # fmt: skip
def test_mistakes_are_told_before_the_work(job, monkeypatch, file, names, message):
    import texture.pipeline

    initial_file(job.parent / "initial.nc", **file)
    (job.parent / "names.toml").write_text(names)
    monkeypatch.setattr(texture.pipeline, "place_stations", lambda *_: pytest.fail("the work began"))
    with pytest.raises(RecipeError, match=message):
        build(job)
    assert not (job.parent / "out").exists()


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"names": None}, "outputs: into: needs names as well"),
        ({"into": None}, "outputs: into_record: says a record of the file in `into`"),
        ({"into": "absent.nc"}, r'outputs.into = "absent.nc" does not exist'),
        ({"into_record": 2}, "has 2 records along tick, asked for 2"),
        ({"into_record": None}, "has 2 records along tick; say which one to fill"),
        ({"into": "bed.nc"}, '"bed.nc" is what the program calls a file of its own'),
        ({"into": "out/state.nc"}, '"state.nc" lies in the output folder'),
    ],
)
def test_settings_that_do_not_fit(job, change, message):
    initial_file(job.parent / "initial.nc")
    (job.parent / "out").mkdir()
    (job.parent / "bed.nc").write_bytes((job.parent / "initial.nc").read_bytes())
    (job.parent / "out" / "state.nc").write_bytes((job.parent / "initial.nc").read_bytes())
    settings = tomllib.loads(job.read_text())
    settings["outputs"] = {k: v for k, v in (settings["outputs"] | change).items() if v is not None}
    job.write_text(tomli_w.dumps(settings))
    with pytest.raises(RecipeError, match=message):
        build(job)


@pytest.mark.slow
def test_text_and_single_precision_through_the_recipe(small):
    outputs = {"geotiff": False, "precision": "float32", "text": True}
    result = build(small, output=small.parent / "out", outputs=outputs, **QUICK)
    with netCDF4.Dataset(small.parent / "out" / "bed.nc") as file:
        stored = file["class_fraction"][:]
        assert stored.dtype == np.float32
        assert (stored.sum(axis=0) == np.float32(1.0)).all()
    table = pd.read_csv(small.parent / "out" / "bed.csv")
    assert len(table) == result.found.target.n_cells
    np.testing.assert_allclose(table["class_fraction_mud"], result.bed.class_fraction[0, 0], atol=2**-24)


@pytest.mark.slow
def test_a_bed_with_every_setting_of_strength_and_a_drawn_rim(small):
    """The settings travel from the recipe through the build into the files."""
    import json

    import pyproj

    to_degrees = pyproj.Transformer.from_crs(32626, 4326, always_xy=True).transform
    line = [to_degrees(500_100.0, y) for y in (4_900_100.0, 4_905_900.0)]  # along the western edge
    geometry = {"type": "LineString", "coordinates": line}
    (small.parent / "edge.geojson").write_text(
        json.dumps(
            {"type": "FeatureCollection", "features": [{"type": "Feature", "properties": {}, "geometry": geometry}]}
        )
    )
    classes = [
        {"name": "mud", "part": "mud", "grain": {"diameter_m": 20e-6}, "packing": {"dry_density_kg_m3": 500.0}},
        {"name": "sand", "part": "sand", "grain": {"diameter_m": 250e-6}},
        {"name": "gravel", "part": "gravel", "grain": {"diameter_m": 8e-3}},
    ]
    layers = [
        {"thickness_m": 0.1, "critical_stress_pa": {"mud": 0.1}},
        {"thickness_m": 1.0, "critical_stress_pa": {"mud": 0.9}},
    ]
    result = build(
        small, output=small.parent / "out", outputs={"geotiff": False}, **QUICK,
        bed={"classes": classes, "layers": layers, "packing": "class", "hiding": "wu", "minimum_thickness_m": 0.01},
        rim={"sides": "edge.geojson", "width_cells": 3, "classes": {"sand": 1.0}},
    )  # fmt: skip
    weight = result.bed.rim_weight.reshape(ROWS, COLUMNS)
    assert (weight[:, 0] == 1.0).all()
    assert (weight[:, 3:] == 0.0).all()
    with netCDF4.Dataset(small.parent / "out" / "bed.nc") as file:
        assert file["critical_stress_in_layer"][0].tolist() == [0.1, 0.9]
        assert file["class_dry_density"][0] == 500.0
        assert file["hiding_exposure_factor"].shape == (3, 2, ROWS, COLUMNS)
        assert "Colby" in file["porosity"].comment
        assert "Wu, Wang and Jia" in file["critical_stress_for_erosion"].comment
    assert (result.summary()["packing"], result.summary()["hiding"]) == ("class", "wu")
    assert "edge.geojson" in (small.parent / "out" / "provenance.json").read_text()
    assert "Wu, Wang and Jia" in (small.parent / "out" / "report.html").read_text()


@pytest.mark.slow
def test_a_halo_and_a_time_fit_the_models_own_file(job):
    """The file has a ring of cells around the grid; the names file pads the bed, and its time is the file's record."""
    initial_file(job.parent / "initial.nc", ROWS + 2, columns=COLUMNS + 2)
    (job.parent / "names.toml").write_text(NAMES + '[halo]\ncells = 1\n[time]\nname = "tick"\n')
    result = build(job)
    with netCDF4.Dataset(job.parent / "out" / "initial.nc") as file:
        stored = file["share_sand"][1, 0]
        inside = result.bed.class_fraction[1, 0].reshape(ROWS, COLUMNS)
        np.testing.assert_allclose(stored[1:-1, 1:-1], inside, atol=2**-24)
        np.testing.assert_array_equal(stored[0], stored[1])
        assert (file["share_sand"][0] == 0.0).all()
    initial_file(job.parent / "initial.nc")
    with pytest.raises(RecipeError, match=r'"share_mud" has 12 along j, the bed has 14'):
        build(job, output=job.parent / "again")
