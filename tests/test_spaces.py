"""Covariates, drift and distance through water from the recipe to the page."""

from __future__ import annotations

import json
import tomllib

import numpy as np
import pytest
import tomli_w
import xarray as xr

from texture import build
from texture.errors import RecipeError
from texture.recipe.file import read_recipe
from texture.spaces import missing_note


@pytest.fixture
def bay(small):
    """The small recipe with a spit of land from the south, and a covariate that covers only its west."""
    import geopandas
    import shapely

    spit = shapely.box(504_800.0, 4_899_000.0, 505_200.0, 4_904_500.0)
    geopandas.GeoDataFrame(geometry=[spit], crs="EPSG:32626").to_file(small.parent / "coast.geojson", driver="GeoJSON")
    settings = tomllib.loads(small.read_text())
    settings["target"]["land"] = "coast.geojson"
    settings["composition"] = {"zeros": "replace"}
    values = np.add.outer(np.arange(12.0), np.arange(20.0))
    values[:, 16:] = np.nan
    xr.Dataset({"slope": (("y", "x"), values)}).to_netcdf(small.parent / "slope.nc")
    small.write_text(tomli_w.dumps(settings))
    return small


def change(recipe, **method):
    settings = tomllib.loads(recipe.read_text())
    settings["method"] = method
    recipe.write_text(tomli_w.dumps(settings))


@pytest.mark.parametrize(
    ("method", "name"),
    [
        ({}, "kriging"),
        ({"distance": "in_water"}, "kriging_in_water"),
        ({"distance": "with_covariates", "covariates": [{"name": "depth"}]}, "kriging_with_covariates"),
        ({"drift": ["x", "y"]}, "kriging_with_drift"),
        ({"name": "kriging_in_water"}, "kriging_in_water"),
    ],
)
def test_one_name_for_each_way(small, method, name):
    change(small, **method)
    recipe = read_recipe(small)
    assert recipe.method.name == name
    # What was resolved reads back as the same.
    change(small, **{k: v for k, v in recipe.method.model_dump(mode="json").items() if v is not None and k != "covariates"},
           covariates=method.get("covariates", []))  # fmt: skip
    assert read_recipe(small).method == recipe.method


@pytest.mark.parametrize(
    ("method", "message"),
    [
        (
            {"name": "nearest", "distance": "in_water"},
            'distance = "in_water" acts with name = "kriging_in_water", found "nearest"',
        ),
        ({"distance": "with_covariates"}, r"needs \[\[method.covariates\]\]"),
        ({"covariates": [{"name": "depth"}]}, "no method takes them"),
        ({"name": "kriging_with_drift"}, "needs method.drift"),
        ({"covariates": [{"name": "slope"}]}, '"slope": file is missing'),
        ({"covariates": [{"name": "depth"}], "drift": ["dept"]}, 'unknown name "dept"; did you mean "depth"'),
        ({"covariates": [{"name": "depth", "variable": "h"}], "drift": ["x"]}, "names one of a NetCDF file"),
        (
            {"covariates": [{"name": "depth"}], "distance": "with_covariates", "fit": "variogram"},
            "knows one distance only",
        ),
    ],
)
def test_settings_that_disagree_are_told(small, method, message):
    change(small, **method)
    with pytest.raises(RecipeError, match=message):
        read_recipe(small)


def test_both_tables_of_methods_have_the_same_names():
    from typing import get_args

    from texture.predict import METHODS
    from texture.recipe import MethodName

    assert set(METHODS) == set(get_args(MethodName))


def test_missing_is_told_in_one_line():
    assert missing_note("slope", 0, 9, 0, 100) == ""
    assert missing_note("slope", 2, 9, 7, 100).startswith('covariate "slope": 2 of 9 stations have no value')


@pytest.mark.slow
def test_covariates_with_holes_leave_no_hole_in_the_bed(bay):
    change(
        bay, distance="with_covariates", covariates=[{"name": "slope", "file": "slope.nc"}, {"name": "shore_distance"}]
    )
    result = build(bay, validation={"count": 3, "compare": ["nearest", "kriging_in_water", "kriging_with_drift"]})
    found = result.found
    out = found.recipe.output
    with xr.open_dataset(out / "texture.nc", mask_and_scale=False) as texture:
        wet = found.target.active.reshape(found.target.shape)
        assert np.isfinite(texture["mud_fraction"].to_numpy()[wet]).all()
        far = np.zeros(found.target.shape, dtype=bool)
        far[:, 18:] = True  # two cells and more from the last value
        assert (texture["evidence"].to_numpy()[wet & far] == 6).all()
        assert (texture["evidence"].to_numpy()[:, :16][wet[:, :16]] != 6).all()
    record = json.loads((out / "provenance.json").read_text())
    assert set(record["space"]) == {"kriging_with_covariates", "kriging_in_water", "kriging_with_drift"}
    assert record["space"]["kriging_in_water"]["in_water"]["dimensions"] >= 2
    assert [c["name"] for c in record["space"]["kriging_with_covariates"]["covariates"]] == ["slope", "shore_distance"]
    assert any(item["file"] == "slope.nc" for item in record["inputs"])
    page = (out / "report.html").read_text()
    assert "slope, shore_distance as further coordinates" in page
    assert "cells have none: the nearest value stands in" in page
    assert "direction, other ranges" in page
    assert "4 dimensions" in str(result.look.opinion)
    assert {m.method for m in found.validation.methods} == {
        "kriging_with_covariates", "nearest", "kriging_in_water", "kriging_with_drift",
    }  # fmt: skip
    # A station without the covariate informs nothing in its own method, and everything in the others.
    learned = found.validation.learned
    lacks = learned.seen.missing
    assert 0 < lacks.sum() < lacks.size
    assert np.isnan(learned.values[lacks]).all()
    assert np.isfinite(learned.values[~lacks]).any(axis=1).all()


@pytest.mark.slow
def test_water_that_is_not_connected_falls_back_to_the_plane_and_says_so(bay):
    import geopandas
    import shapely

    wall = shapely.box(504_800.0, 4_899_000.0, 505_200.0, 4_910_000.0)
    geopandas.GeoDataFrame(geometry=[wall], crs="EPSG:32626").to_file(bay.parent / "coast.geojson", driver="GeoJSON")
    result = build(bay, method={"distance": "in_water"}, validation={"count": 3, "compare": ["nearest"]})
    assert result.found.mapper.space.ground is None
    assert "the water is not connected" in repr(result)
    assert "the water is not connected" in result.answer()
    assert "distance in the plane is taken instead" in (result.found.recipe.output / "report.html").read_text()


@pytest.mark.parametrize(
    ("method", "message"),
    [
        ({"radius_m": 500.0}, 'radius_m chooses stations point by point; it needs neighbourhood = "nearest"'),
        ({"anisotropy": [30.0, 2.0], "distance": "in_water"}, "anisotropy acts on kriging in the plane"),
        ({"anisotropy": [30.0, 0.5]}, "found ratio 0.5, expected longer over shorter"),
        ({"anisotropy": "fit", "fit": "variogram"}, 'needs fit = "likelihood"'),
        ({"at_least": 3}, "at_least acts with radius_m or per_sector_at_most only"),
        ({"name": "nearest", "neighbourhood": "nearest", "radius_m": 500.0}, "acts on kriging only"),
        ({"neighbourhood": "nearest", "radius_m": 500.0, "neighbours": 8, "at_least": 9}, "more than the 8 neighbours"),
    ],
)
def test_a_rule_that_cannot_act_is_told(small, method, message):
    change(small, **method)
    with pytest.raises(RecipeError, match=message):
        read_recipe(small)


@pytest.mark.slow
@pytest.mark.parametrize("anisotropy", ["fit", [30.0, 2.0]])
def test_direction_goes_the_whole_way(small, anisotropy):
    change(small, anisotropy=anisotropy)
    result = build(small, validation={"count": 3, "compare": ["nearest"]}, composition={"zeros": "replace"})
    assert result.look.opinion.agrees
    found = [c.anisotropy for c in result.found.mapper.structure if c.structures]
    assert found
    if anisotropy == "fit":
        assert len(set(found)) == 1
    else:
        assert set(found) == {(30.0, 2.0)}
        assert "along azimuth 30°, 2 times that across it" in repr(result)


@pytest.mark.slow
def test_a_radius_leaves_the_map_empty_and_the_bed_whole(small):
    change(small, neighbourhood="nearest", radius_m=1_200.0, at_least=3, per_sector_at_most=4)
    result = build(small, validation={"count": 3, "compare": ["nearest"]}, composition={"zeros": "replace"})
    target, out = result.found.target, result.found.recipe.output
    outside = result.estimate.outside
    # The same by hand: fewer than three stations within the radius of any of the points inside the cell.
    centres = result.found.some_centres(10**6)
    near = np.linalg.norm(centres[:, None] - result.found.observations.points, axis=2)
    sure = (np.sort(near, axis=1)[:, 2] > 1_200.0 + 360.0), (np.sort(near, axis=1)[:, 2] < 1_200.0 - 360.0)
    assert outside[sure[0]].all()
    assert not outside[sure[1]].any()
    assert 0 < outside.sum() < target.n_cells
    with xr.open_dataset(out / "texture.nc") as texture, xr.open_dataset(out / "bed.nc") as bed:
        empty = np.isnan(texture["mud_fraction"].to_numpy()).ravel()
        np.testing.assert_array_equal(empty, outside)
        np.testing.assert_array_equal(np.isnan(texture["logratio_1_variance"].to_numpy()).ravel(), outside)
        assert (texture["evidence"].to_numpy().ravel()[outside] == 6).all()
        assert (texture["texture_class"].to_numpy().ravel()[outside] == 0).all()
        assert np.isfinite(bed["class_fraction"].to_numpy()).all()
        rim = bed["rim_weight"].to_numpy().ravel() > 0
        evidence = bed["evidence"].to_numpy()[0].ravel()
        assert (evidence[outside & ~rim] == 6).all()
    assert f"{outside.sum():,} cells have fewer than 3 stations within 1.2 km" in repr(result)
