"""What the community's checker says of our files, and what inspect makes of it."""

import importlib.util

import netCDF4
import numpy as np
import pytest
import xarray as xr

from texture.bed import check_bed, make_bed
from texture.output import bed_arrays, bed_dataset, check_cf, open_bed, write_netcdf
from texture.output.open_bed import _mesh_pairs

from .test_open_bed import written


@pytest.mark.slow
def test_our_file_passes_and_a_spoilt_one_does_not(tmp_path):
    path = written(tmp_path)
    assert check_cf(path).verdict == "pass"
    with netCDF4.Dataset(path, "r+") as file:
        file["porosity"].units = "pores"
        file["evidence"].flag_meanings = "one two"
    found = check_cf(path)
    assert found.verdict == "warn"
    assert "flag_meanings" in found.detail or "pores" in found.detail


def test_without_the_checker_it_says_so(tmp_path, monkeypatch):
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None)
    found = check_cf(tmp_path / "bed.nc")
    assert found.verdict == "skip"
    assert "not installed" in found.detail


def mesh_file(path):
    """Two triangles and a quadrilateral in a row: 0-1-2, 1-3-2, 3-4-5-2."""
    faces = np.array([[0, 1, 2, -1], [1, 3, 2, -1], [3, 4, 5, 2]], dtype=np.int32)
    attributes = {"cf_role": "face_node_connectivity", "start_index": np.int32(0), "_FillValue": np.int32(-1)}
    return xr.Dataset({"mesh_face_nodes": (("mesh_face", "mesh_corner"), faces, attributes)})


def test_neighbours_of_a_mesh_by_hand():
    data = mesh_file(None)
    assert sorted(map(sorted, _mesh_pairs(data, "mesh_face").tolist())) == [[0, 1], [1, 2]]
    nodes = _mesh_pairs(data, "mesh_node").tolist()
    assert nodes == [[0, 1], [0, 2], [1, 2], [1, 3], [2, 3], [2, 5], [3, 4], [4, 5]]
    assert _mesh_pairs(xr.Dataset(), "place") is None


def test_inspect_looks_at_a_mesh(tmp_path, demo_recipe):
    """The demo's triangular mesh with a bed of one kind: every check that needs no rows and columns is made."""
    from texture.recipe import Recipe, TargetSettings
    from texture.targets import read_target

    from .conftest import make_estimate, make_recipe

    target = read_target(TargetSettings(file=demo_recipe.parent / "model_mesh.nc"))
    recipe: Recipe = make_recipe()
    estimate = make_estimate(target)
    bed = make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim)
    write_netcdf(bed_dataset(bed, target, recipe), tmp_path / "bed.nc")
    found = {c.name: c for c in check_bed(bed_arrays(open_bed(tmp_path / "bed.nc")))}
    assert {c.verdict for c in found.values()} <= {"pass", "warn"}
    assert found["rim is coarse"].verdict == "pass"
    assert found["isolated water"].verdict == "pass"
    assert "jumps" in found
