"""A rim from the bed of the larger model that this one is nested in."""

import netCDF4
import numpy as np
import pytest

from texture import build
from texture.bed import make_bed
from texture.errors import BedError, RecipeError
from texture.output import apply_names, bed_dataset, parent_bed, read_names, write_netcdf
from texture.recipe import Rim

from .conftest import make_curvilinear, make_estimate, make_raster, make_recipe

CLASSES = ("mud", "sand", "gravel")


def parent_file(path, target, names=None):
    estimate, recipe = make_estimate(target), make_recipe()
    bed = make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim)
    data = bed_dataset(bed, target, recipe)
    if names is not None:
        data = apply_names(data, read_names(names, target.dims))
    write_netcdf(data, path)
    return bed


@pytest.mark.parametrize("target", [make_raster(), make_curvilinear()], ids=["raster", "curvilinear"])
def test_at_its_own_cells_it_is_the_parent_itself(tmp_path, target):
    bed = parent_file(tmp_path / "bed.nc", target)
    wet = np.flatnonzero(target.active)
    found = parent_bed(
        tmp_path / "bed.nc", None, ("gravel", "mud", "sand"), 3, target.longitude[wet], target.latitude[wet]
    )
    np.testing.assert_allclose(found[[1, 2, 0], :2], bed.class_fraction[:, :, wet], atol=1e-15)
    np.testing.assert_array_equal(found[:, 2], found[:, 1])  # below the parent's lowest layer it goes on


def test_through_a_names_file_with_blank_land(tmp_path):
    names = '[dimensions]\ny = "j"\n[variables]\nclass_fraction = { name = "s_{class}", split = "class" }\n[values]\nland = -9.0\n'
    (tmp_path / "names.toml").write_text(names)
    target = make_raster()
    bed = parent_file(tmp_path / "bed.nc", target, tmp_path / "names.toml")
    wet = np.flatnonzero(target.active)
    found = parent_bed(
        tmp_path / "bed.nc", tmp_path / "names.toml", CLASSES, 2, target.longitude[wet], target.latitude[wet]
    )
    np.testing.assert_allclose(found, bed.class_fraction[:, :, wet], atol=1e-15)


def test_parents_that_do_not_fit(tmp_path):
    target = make_raster()
    parent_file(tmp_path / "bed.nc", target)
    place = target.longitude[-1:], target.latitude[-1:]
    with pytest.raises(BedError, match=r"bed.nc: has the classes mud, sand, gravel; expected mud, sand"):
        parent_bed(tmp_path / "bed.nc", None, ("mud", "sand"), 1, *place)
    with pytest.raises(BedError, match=r"bed.nc: 1 rim cells lie further than 2 of its cells from its water"):
        parent_bed(tmp_path / "bed.nc", None, CLASSES, 1, place[0] + 0.1, place[1])
    with netCDF4.Dataset(tmp_path / "bed.nc", "r+") as file:
        file.renameVariable("x", "a")
    with pytest.raises(BedError, match=r"bed.nc: has no positions"):
        parent_bed(tmp_path / "bed.nc", None, CLASSES, 1, *place)


def test_settings_of_a_parent():
    with pytest.raises(ValueError, match="give either classes or composition or parent"):
        Rim(width_cells=2, parent="a.nc", classes={"sand": 1.0})
    with pytest.raises(ValueError, match="parent_names: is of the file in `parent`"):
        Rim(width_cells=2, parent_names="a.toml", classes={"sand": 1.0})


@pytest.mark.slow
def test_a_nested_model_takes_its_rim_from_the_parent(small):
    """The parent is a coarser bed of the same place; the child's edge has the parent's bed, its inside its own map."""
    quick = {"validation": {"count": 2, "compare": []}, "outputs": {"geotiff": False}}
    bounds = (499_000.0, 4_899_000.0, 511_000.0, 4_907_000.0)
    parent = build(small, output=small.parent / "parent", target={"bounds": bounds, "cell_size": 1000.0}, **quick)
    rim = {"sides": "open", "width_cells": 3, "classes": None, "parent": "parent/bed.nc"}
    child = build(small, output=small.parent / "out", rim=rim, **quick)
    target, weight = child.found.target, child.bed.rim_weight
    edge = np.flatnonzero(weight == 1.0)
    assert edge.size == 2 * (20 + 10)
    coarse = parent.found.target
    for i in edge[::7]:
        near = np.argmin(np.hypot(coarse.longitude - target.longitude[i], (coarse.latitude - target.latitude[i]) * 1.4))
        difference = np.abs(child.bed.class_fraction[:, 0, i][:, None] - parent.bed.class_fraction[:, 0]).sum(axis=0)
        assert difference.min() < 1e-9
        assert difference[near] < 0.2
    np.testing.assert_allclose(child.bed.class_fraction.sum(axis=0), 1.0, atol=1e-12)
    assert "parent/bed.nc" in (small.parent / "out" / "provenance.json").read_text()


def test_a_parent_that_is_missing(small):
    with pytest.raises(RecipeError, match=r'rim.parent = "none.nc" does not exist'):
        build(small, rim={"classes": None, "parent": "none.nc"})
