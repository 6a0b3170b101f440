"""The main job on the demo's files: one build, looked at from outside."""

from __future__ import annotations

import json
import subprocess
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import rasterio
import xarray as xr

from texture import build
from texture.bed import EVIDENCE
from texture.mapping import make_mapper

pytestmark = pytest.mark.slow

RIM, LAND = 3, 4


@pytest.fixture(scope="module")
def truth(demo_recipe) -> np.ndarray:
    with xr.open_dataset(demo_recipe.parent / "truth.nc") as data:
        return np.stack([data[part].to_numpy().ravel() for part in ("mud", "sand", "gravel")], axis=1)


def test_every_file_is_there(plain):
    out = plain.found.recipe.output
    expected = {
        "stations.csv", "stations.gpkg", "audit.csv", "rows.csv", "texture.nc", "bed.nc", "inventory.csv", "validation.csv", "held_out.csv",
        "report.html", "map.png", "provenance.json", "recipe_resolved.toml",
    }  # fmt: skip
    assert {p.name for p in out.iterdir()} == expected | {"geotiff"}
    assert {p.relative_to(out).as_posix() for p in plain.files} == {
        p.relative_to(out).as_posix() for p in out.rglob("*") if p.is_file()
    }
    assert not [p for p in out.parent.iterdir() if p.name.startswith(".texture-")]


def test_bed_file_is_ready_for_a_model(plain):
    wet = plain.found.target.active.reshape(plain.found.target.shape)
    with xr.open_dataset(plain.found.recipe.output / "bed.nc") as bed:
        fraction = bed["class_fraction"].transpose("class", "layer", "row", "column").to_numpy()
        assert np.isfinite(fraction).all()
        assert fraction.min() >= 0.0
        assert fraction.max() <= 1.0
        np.testing.assert_allclose(fraction.sum(axis=0), 1.0, rtol=0, atol=1e-12)
        thickness = bed["erodible_thickness"].transpose("layer", "row", "column").to_numpy()
        assert (thickness[:, ~wet] == 0.0).all()
        hard = bed["hard_ground_probability"].transpose("row", "column").to_numpy()[wet] >= 0.5
        assert 0 < hard.sum() < 0.02 * wet.sum()  # seven of the demo's rows found rock or got nothing
        np.testing.assert_allclose(thickness[:, wet], np.array([[0.10], [1.90]]) * np.where(hard, 0.0, 1.0))
        mass = bed["class_mass_content"].transpose("class", "layer", "row", "column").to_numpy()
        density = bed["dry_density"].transpose("layer", "row", "column").to_numpy()
        np.testing.assert_allclose(mass, thickness * density * fraction, rtol=1e-12)
        evidence = bed["evidence"].transpose("layer", "row", "column").to_numpy()
        assert (evidence[:, ~wet] == LAND).all()
        assert set(np.unique(evidence[0, wet])) <= set(EVIDENCE) - {0, LAND}
        for name, variable in bed.data_vars.items():
            if {"row", "column"} <= set(variable.dims) and variable.dtype.kind == "f":
                assert np.isfinite(variable.to_numpy()).all(), name


def test_land_takes_the_nearest_water_cell(plain):
    target, bed = plain.found.target, plain.bed
    rows, columns = target.shape
    wet = target.active.reshape(rows, columns)
    fraction = bed.class_fraction[:, 0].reshape(-1, rows, columns)
    shore = [(r, c) for r in range(1, rows) for c in range(columns) if not wet[r, c] and wet[r - 1, c]][:200]
    neighbours = [(0, 1), (0, -1), (1, 0), (-1, 0)]
    for r, c in shore:
        around = [
            (r + i, c + j) for i, j in neighbours if 0 <= r + i < rows and 0 <= c + j < columns and wet[r + i, c + j]
        ]
        assert any(np.array_equal(fraction[:, r, c], fraction[:, i, j]) for i, j in around)


def test_rim_is_coarse_at_the_open_edge_and_the_estimate_inside(plain):
    target, bed = plain.found.target, plain.bed
    names = bed.classes.names
    edge = target.open_cells
    assert edge.sum() > 200
    assert (bed.rim_weight[edge] == 1.0).all()
    np.testing.assert_array_equal(bed.class_fraction[names.index("medium_sand"), :, edge], 1.0)
    assert (bed.evidence[0, (bed.rim_weight > 0) & target.active] == RIM).all()
    inside = target.active & (bed.rim_weight == 0.0)
    share = np.array([c.share for c in plain.found.recipe.bed.classes])
    estimate = plain.estimate.fractions[:, bed.classes.part] * share
    kept = inside & (estimate >= plain.found.recipe.bed.least_fraction).all(axis=1)
    assert kept.sum() > 1000
    np.testing.assert_allclose(bed.class_fraction[:, 0, kept].T, estimate[kept], atol=1e-12)
    # The river's two cells on the outer edge are an inlet: they keep the estimate.
    inlet = np.concatenate([o.cells for o in target.openings if o.inlet])
    assert (bed.rim_weight[inlet] == 0.0).all()


def test_expected_fractions_beat_the_controls_against_the_truth(plain, truth, capsys):
    """The demo's true cell means are known: the map must be nearer to them than methods any spreadsheet could do."""
    found, wet = plain.found, plain.found.target.active
    error = {"kriging": plain.estimate.fractions[wet] - truth[wet]}
    for name in ("nearest", "inverse_distance"):
        mapper = make_mapper(name, found.validation.plain, found.recipe.method)
        error[name] = mapper.expected(*mapper.predict(found.some_centres(10**6))) - truth[wet]
    rmse = {name: np.sqrt((e**2).mean(axis=0)) for name, e in error.items()}
    with capsys.disabled():
        for name, values in rmse.items():
            print(f"\n  against the truth, {name}: RMSE " + ", ".join(f"{v:.4f}" for v in values), end="")
    assert (rmse["kriging"] < rmse["nearest"]).all()
    assert (rmse["kriging"] < rmse["inverse_distance"]).all()


def test_intervals_hold_the_true_cells(plain, truth, capsys):
    """The 5 to 95 % interval of a cell's mean holds the true mean of 86 to 94 % of the cells, part by part.

    Where the true gravel is below the detection limit, as in two fifths of the bed, the map cannot tell it from none; such a
    cell counts by the share of what the map has below the limit that lies in the interval (Czado et al. 2009).
    """
    from texture.structure.averaging import averaged_out, sampling_distance_m
    from texture.validation.ensemble import pit_share_below

    found, limit = plain.found, plain.found.recipe.composition.detection_limit
    wet = found.target.active
    low, _, high = plain.estimate.quantiles[:, wet]
    known = (truth[wet] >= low) & (truth[wet] <= high)
    assert 0.86 < known[:, 0].mean() < 0.94
    assert 0.86 < known[:, 1].mean() < 0.94
    levels = tuple(np.linspace(0.005, 0.995, 100))
    share = averaged_out(np.sqrt(found.target.area_m2[wet]), sampling_distance_m(found.observations.points))
    estimate = plain.estimate
    table = found.mapper.cell_quantiles(estimate.mean[wet], estimate.variance[wet], levels, share)
    covered = []
    for part in range(3):
        true = truth[wet, part]
        edge = np.maximum(true, limit)
        up_to = np.array([np.interp(v, q, levels, 0.0, 1.0) for v, q in zip(edge, table[:, :, part].T, strict=True)])
        below = np.where(true < limit, 0.0, up_to)
        inside = [pit_share_below(below, up_to, level).mean() for level in (0.05, 0.95)]
        covered.append(inside[1] - inside[0])
    with capsys.disabled():
        print("\n  90 % intervals of true cell means hold: " + ", ".join(f"{v:.3f}" for v in covered), end="")
    assert covered[:2] == pytest.approx(known[:, :2].mean(axis=0), abs=0.005)
    assert 0.86 < covered[2] < 0.94


def test_held_out_scores_tell_the_same_story(plain):
    table = pd.read_csv(plain.found.recipe.output / "validation.csv")
    # The first row of a method and part is the map's own treatment of zeros; others that were tried come after.
    first = table[table["score"] == "rmse"].drop_duplicates(["method", "part"])
    rmse = first.pivot(index="method", columns="part", values="value")
    assert (rmse.loc["kriging", ["mud", "sand", "gravel"]] < rmse.loc["nearest", ["mud", "sand", "gravel"]]).all()
    held_out = pd.read_csv(plain.found.recipe.output / "held_out.csv")
    assert len(held_out) == 3 * plain.found.observations.count
    kriged = held_out[held_out["method"] == "kriging"]
    again = np.sqrt(((kriged["mud_predicted"] - kriged["mud_measured"]) ** 2).mean())
    assert again == pytest.approx(rmse.loc["kriging", "mud"], rel=1e-9)


def test_map_file_opens_with_cf_decoding_and_matches(plain):
    import cf_xarray  # noqa: F401

    with xr.open_dataset(plain.found.recipe.output / "texture.nc") as data:
        assert data["mud_fraction"].dims == ("row", "column")
        np.testing.assert_array_equal(data["mud_fraction"].to_numpy().ravel(), plain.estimate.fractions[:, 0])
        assert data.cf["longitude"].shape == plain.found.target.shape
        np.testing.assert_array_equal(data.cf["longitude"].to_numpy().ravel(), plain.found.target.longitude)
        np.testing.assert_allclose(data["quantile"], [0.05, 0.5, 0.95])
        low, _, high = data["gravel_fraction_quantile"].transpose("quantile", ...).to_numpy()
        wet = plain.found.target.active.reshape(low.shape)
        assert (low[wet] <= high[wet]).all()
        total = sum(data[f"{p}_fraction"].to_numpy() for p in ("mud", "sand", "gravel"))
        np.testing.assert_allclose(total[wet], 1.0, atol=1e-12)
        assert np.isnan(total[~wet]).all()


def test_geotiff_shows_the_cell_under_a_known_place(plain):
    import pyproj

    path = plain.found.recipe.output / "geotiff" / "mud_fraction.tif"
    target = plain.found.target
    with rasterio.open(path) as image:
        assert image.crs.is_projected
        assert "resampled from a curvilinear grid" in image.descriptions[0]
        to_image = pyproj.Transformer.from_crs(4326, image.crs.to_wkt(), always_xy=True)
        cells = np.flatnonzero(target.active)[::97]
        places = np.column_stack(to_image.transform(target.longitude[cells], target.latitude[cells]))
        shown = np.array([v[0] for v in image.sample(places)])
        image_values = image.read(1, masked=True)
    # A pixel shows the cell that its centre lies in: at a cell's centre that is the cell or a neighbour.
    near = np.abs(shown - plain.estimate.fractions[cells, 0]) < 1e-6
    assert near.mean() > 0.6
    assert image_values.count() > target.active.sum() * 0.9


@pytest.mark.tools
def test_gdalinfo_and_ncdump_read_the_files(plain, need_tool):
    out = plain.found.recipe.output
    info = json.loads(
        subprocess.run(
            [need_tool("gdalinfo"), "-json", out / "geotiff" / "gravel_fraction.tif"], capture_output=True, check=True
        ).stdout
    )
    assert info["bands"][0]["noDataValue"] == -9999.0
    assert "UTM zone 26N" in info["coordinateSystem"]["wkt"]
    header = subprocess.run(
        [need_tool("ncdump"), "-h", out / "bed.nc"], capture_output=True, text=True, check=True
    ).stdout
    assert "class_fraction(class, layer, row, column)" in header
    assert "flag_meanings" in header


def test_names_file_gives_the_model_its_own_words(demo_recipe, tmp_path):
    result = build(demo_recipe, output=tmp_path / "out", validation={"compare": [], "folds": "random", "count": 2})
    with xr.open_dataset(tmp_path / "out" / "bed.nc", decode_cf=False) as bed:
        assert {"share_of_fine_mud", "share_of_medium_sand", "bed_height", "packed_weight"} <= set(bed.data_vars)
        assert bed["share_of_gravel"].dims == ("strat", "j", "i")
        wet = result.found.target.active.reshape(result.found.target.shape)
        np.testing.assert_allclose(
            bed["share_of_gravel"].to_numpy()[0][wet], result.bed.class_fraction[3, 0].reshape(wet.shape)[wet]
        )


def test_provenance_tells_inputs_and_no_path_of_this_machine(plain):
    out = plain.found.recipe.output
    record = json.loads((out / "provenance.json").read_text())
    assert {"recipe.toml", "survey_1987.xlsx", "notes_1962.ods", "model_grid.nc", "coast.geojson"} <= {
        i["file"] for i in record["inputs"]
    }
    assert record["counts"]["rows_read"] == 522
    for path in out.rglob("*"):
        if path.suffix in {".json", ".html", ".toml", ".csv", ".nc"}:
            content = path.read_bytes()
            assert str(out.parent).encode() not in content, path.name
            assert str(Path.home()).encode() not in content, path.name


def test_second_opinion_agrees(plain):
    assert plain.look is not None
    assert plain.summary()["second_opinion"] is not None
    json.dumps(plain.summary(), allow_nan=False)


def test_same_inputs_give_the_same_arrays_whatever_the_threads(plain, demo_recipe, tmp_path):
    import os
    import sys

    environment = {**os.environ, "NUMBA_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
    subprocess.run(
        [sys.executable, "-m", "texture_cli", "build", plain.found.recipe.output.parent / "recipe.toml", "--output", tmp_path / "out", "--quiet"],
        check=True, env=environment,
    )  # fmt: skip
    for name in ("texture.nc", "bed.nc"):
        with xr.open_dataset(plain.found.recipe.output / name) as a, xr.open_dataset(tmp_path / "out" / name) as b:
            for variable in a.variables:
                assert a[variable].to_numpy().tobytes() == b[variable].to_numpy().tobytes(), (name, variable)
