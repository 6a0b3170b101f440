"""More grids from one fit: what they hold is what the fit says there, and what cannot be is said before the work."""

import json

import numpy as np
import pytest
import rasterio
import xarray as xr
from rasterio.transform import Affine

import texture.bed.build
import texture.bed.rim
from texture import build
from texture.bed.rim import rim_weight
from texture.errors import BedError, RecipeError, TargetError
from texture.planning import plan

# A third of the small recipe's cells of 500 m: each third cell's centre is also the centre of a cell of the large grid.
INNER = {
    "name": "inner",
    "bounds": [502_000.0, 4_901_000.0, 505_000.0, 4_904_000.0],
    "cell_size": 500.0 / 3.0,
    "crs": "EPSG:32626",
    "points_per_cell": 1,
    "rim": {"width_cells": 3, "sides": ["west"], "composition": {"mud": 0.1, "sand": 0.9}},
}
QUICK = {"validation": {"count": 2, "compare": []}, "composition": {"logratio": "shares"}}
ONE_POINT = {"target": {"points_per_cell": 1}}
ZONE = """{"type": "Polygon", "coordinates": [[[-26.96, 44.255], [-26.95, 44.255], [-26.95, 44.28], [-26.96, 44.28], [-26.96, 44.255]]]}"""


def places(target):
    return np.round(np.column_stack([target.longitude, target.latitude]), 8).tolist()


@pytest.mark.slow
def test_a_nested_grid_holds_what_the_same_fit_says(small, monkeypatch):
    (small.parent / "zone.geojson").write_text(ZONE)
    zones = [{"name": "hollow", "polygons": "zone.geojson", "kind": "given", "composition": {"mud": 1.0}}]
    rims = []
    for module in (texture.bed.rim, texture.bed.build):
        monkeypatch.setattr(
            module, "rim_weight", lambda cells, *more: rims.append(cells.name) or rim_weight(cells, *more)
        )
    result = build(small, further_targets=[INNER], zones=zones, **QUICK, **ONE_POINT)
    inner, out = result.further["inner"], result.found.recipe.output
    assert len(rims) == 2  # the way through water to each rim is found once
    own = {tuple(p): i for i, p in enumerate(places(result.found.target))}
    pairs = np.array([(own[tuple(p)], i) for i, p in enumerate(places(inner.found.target)) if tuple(p) in own])
    assert len(pairs) == 36  # of 18 × 18 small cells, one in nine
    np.testing.assert_allclose(
        inner.estimate.fractions[pairs[:, 1]], result.estimate.fractions[pairs[:, 0]], rtol=0, atol=1e-12
    )
    np.testing.assert_array_equal(inner.estimate.evidence[pairs[:, 1]], result.estimate.evidence[pairs[:, 0]])
    assert (inner.estimate.evidence == 5).any()  # the zone lies on its cells too
    with xr.open_dataset(out / "inner" / "bed.nc") as bed:
        fraction = bed["class_fraction"].transpose("class", "layer", ...).to_numpy()
        np.testing.assert_allclose(fraction.sum(axis=0), 1.0, rtol=0, atol=1e-12)
        weight = bed["rim_weight"].to_numpy().reshape(18, 18)
        assert (weight[:, 0] == 1.0).all()
        assert (weight[:, 3:] == 0.0).all()
        np.testing.assert_allclose(fraction[:, 0, :, 0].sum(axis=1), np.array([0.1, 0.9, 0.0]) * 18, atol=1e-9)
    with xr.open_dataset(out / "inner" / "texture.nc") as data:
        np.testing.assert_array_equal(data["mud_fraction"].to_numpy().ravel(), inner.estimate.fractions[:, 0])
        assert data.attrs["title"] == "Small: inner"
    assert [p.name for p in sorted((out / "inner" / "geotiff").iterdir())] == [
        p.name for p in sorted((out / "geotiff").iterdir())
    ]
    listed = json.loads((out / "provenance.json").read_text())["results"]
    assert "inner/bed.nc" in {entry["file"] for entry in listed}
    record = result.summary()["further_targets"]["inner"]
    assert record["cells"] == 324
    assert "inner/bed.nc" in record["files"]
    assert any("further     inner: " in line for line in result.summary_lines())
    assert "Further target, from the same fit" in (out / "report.html").read_text()


@pytest.mark.slow
def test_the_runs_own_map_does_not_depend_on_further_targets(small, tmp_path):
    names = ("texture.nc", "bed.nc", "validation.csv", "held_out.csv")
    alone = build(small, output=tmp_path / "alone", **QUICK).found.recipe.output
    both = build(small, output=tmp_path / "both", further_targets=[{**INNER, "rim": None}], **QUICK).found.recipe.output
    assert [(alone / n).read_bytes() for n in names] == [(both / n).read_bytes() for n in names]


@pytest.mark.slow
def test_a_covariate_that_is_not_known_there(small):
    far = {**INNER, "bounds": [532_000.0, 4_901_000.0, 535_000.0, 4_904_000.0], "rim": None}
    x, y = np.meshgrid(np.arange(40), np.arange(24))
    with rasterio.open(
        small.parent / "slope.tif", "w", driver="GTiff", width=40, height=24, count=1, dtype="float64", crs="EPSG:32626",
        transform=Affine(250.0, 0.0, 500_000.0, 0.0, -250.0, 4_906_000.0),
    ) as file:  # fmt: skip
        file.write(x + 2.0 * y, 1)
    method = {"name": "kriging_with_drift", "covariates": [{"name": "slope", "file": "slope.tif"}]}
    with pytest.raises(RecipeError, match=r'further_targets "inner": no water cell of .* has a value of slope'):
        build(small, further_targets=[far], method=method, **QUICK)
    assert not (small.parent / "out" / "bed.nc").exists()


@pytest.mark.parametrize(
    ("further", "error", "words"),
    [
        ([INNER, {**INNER, "name": "Inner"}], RecipeError, 'the name "inner" is given twice'),
        ([{**INNER, "name": "geotiff"}], RecipeError, 'the name "geotiff" is a folder of the run itself'),
        ([{**INNER, "name": "../inner"}], RecipeError, r"further_targets\[0\]\.name"),
        ([{**INNER, "rim": {"width_cells": 2, "classes": {"snd": 1.0}}}], RecipeError, 'rim.classes: unknown name "snd"'),
        ([{**INNER, "rim": {"width_cells": 40, "classes": {"sand": 1.0}}}], BedError, '"inner": rim: a width of 40 cells'),
        ([{**INNER, "cell_size": 700.0}], TargetError, 'further_targets "inner": .* expected a whole number'),
        ([{**INNER, "file": "no.nc", "bounds": None, "cell_size": None}], RecipeError, "does not exist"),
    ],
)  # fmt: skip
def test_mistakes_are_told_before_the_work(small, further, error, words):
    with pytest.raises(error, match=words) as caught:
        plan(small, further_targets=further)
    assert "\n" not in str(caught.value)


def test_a_folder_of_that_name_is_not_written_into(small):
    (small.parent / "out" / "inner").mkdir(parents=True)
    with pytest.raises(RecipeError, match="holds results of an earlier run"):
        build(small, further_targets=[INNER], **QUICK)


def test_a_plan_counts_them(small):
    alone, both = plan(small), plan(small, further_targets=[INNER])
    assert both.memory_mb > alone.memory_mb
    assert any("further     inner: 18 × 18 cells" in line for line in both.summary_lines())
    assert both.summary()["further_targets"] == {"inner": 324}


def test_a_names_file_of_its_own(small):
    (small.parent / "names.toml").write_text('[dimensions]\ny = "north"\nx = "east"\n')
    assert plan(small, further_targets=[{**INNER, "names": "names.toml"}]).further
    (small.parent / "names.toml").write_text('[dimensions]\nrow = "north"\n')
    with pytest.raises(RecipeError, match=r'further_targets "inner": names.toml: dimensions: unknown "row"'):
        plan(small, further_targets=[{**INNER, "names": "names.toml"}])
