"""From a file of either kind to the table of checks."""

import numpy as np
import pytest

from texture.bed import check_bed, make_bed
from texture.errors import BedError
from texture.output import apply_names, bed_arrays, bed_dataset, open_bed, read_names, write_netcdf

from .conftest import make_curvilinear, make_estimate, make_recipe

NAMES = """
[dimensions]
layer = "strat"
[variables]
class_fraction = { name = "share_of_{class}", split = "class", order = ["row", "column", "layer"], units = "percent", scale = 100.0 }
grain_diameter = { name = "size", units = "mm", scale = 1000.0 }
erodible_thickness = { name = "bed_height" }
[values]
land = -9999.0
layer_order = "bottom_first"
"""


def written(tmp_path, names=None):
    target, recipe = make_curvilinear(), make_recipe()
    estimate = make_estimate(target)
    data = bed_dataset(make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim), target, recipe)
    if names:
        (tmp_path / "names.toml").write_text(names)
        data = apply_names(data, read_names(tmp_path / "names.toml", target.dims))
    write_netcdf(data, tmp_path / "bed.nc")
    return tmp_path / "bed.nc"


def table(path, names=None):
    return {check.name: check for check in check_bed(bed_arrays(open_bed(path, names)))}


def test_our_own_file(tmp_path):
    found = table(written(tmp_path))
    assert {name for name, check in found.items() if check.verdict == "fail"} == set()
    assert found["sums"].verdict == "pass"
    assert found["rim is coarse"].verdict == "pass"
    assert found["land"].detail == "filled, with no erodible thickness"


def test_a_renamed_file_gives_the_same_verdicts(tmp_path):
    ours, theirs = table(written(tmp_path)), table(written(tmp_path, NAMES), tmp_path / "names.toml")
    assert theirs["land"].verdict == "warn"  # the names file put −9999 there
    differing = {name for name in ours if ours[name] != theirs[name]}
    assert differing <= {"land", "sums", "mass content"}  # percent and back costs the last digits
    assert theirs["sums"].verdict == theirs["mass content"].verdict == "pass"
    assert theirs["grain diameter"] == ours["grain diameter"]


def test_a_bed_with_a_hole_fails(tmp_path):
    data = open_bed(written(tmp_path))
    data["class_fraction"].values[1, 0, 2, 3] = np.nan
    found = {c.name: c for c in check_bed(bed_arrays(data))}
    assert (found["holes"].verdict, found["holes"].detail) == ("fail", "class_fraction: 1 cells, (row, column) (2, 3)")


def test_unexpected_dimensions(tmp_path):
    data = open_bed(written(tmp_path)).isel(layer=0)
    with pytest.raises(BedError, match="expected class, layer and one or two"):
        bed_arrays(data)
