import netCDF4
import numpy as np
import pytest

from texture.bed import make_bed
from texture.errors import OutputError, RecipeError
from texture.output import apply_names, bed_dataset, read_names, write_into

from .conftest import COLUMNS, ROWS, make_curvilinear, make_estimate, make_recipe

NAMES = """
[dimensions]
layer = "strat"
row = "j"
column = "i"
[variables]
class_fraction = { name = "share_{class}", split = "class", order = ["layer", "row", "column"] }
erodible_thickness = { name = "bed_height" }
[values]
layer_order = "bottom_first"
"""


@pytest.fixture
def named(tmp_path):
    target, recipe = make_curvilinear(), make_recipe()
    estimate = make_estimate(target)
    (tmp_path / "names.toml").write_text(NAMES)
    names = read_names(tmp_path / "names.toml", target.dims)
    bed = make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim)
    return apply_names(bed_dataset(bed, target, recipe), names), names


def initial_file(path, records=1, layers=2, rows=ROWS, leave_out=()):
    """An initial file of an invented model: packed, single precision, unlimited time, a group, odd attributes."""
    rng = np.random.default_rng(1)
    with netCDF4.Dataset(path, "w") as file:
        file.title, file.odd = "initial state", np.int16(7)
        file.createDimension("tick", None)
        for name, length in (("strat", layers), ("j", rows), ("i", COLUMNS)):
            file.createDimension(name, length)
        water = file.createVariable("warmth", "i2", ("tick", "j", "i"), fill_value=-1, zlib=True)
        water.scale_factor, water.units = 0.01, "degC"
        water[:] = rng.uniform(0, 20, (records, rows, COLUMNS))
        for name in ("share_mud", "share_sand", "share_gravel"):
            if name not in leave_out:
                share = file.createVariable(name, "f4", ("tick", "strat", "j", "i"))
                share.note = "old"
                share[:] = rng.uniform(size=(records, layers, rows, COLUMNS))
        height = file.createVariable("bed_height", "f8", ("strat", "j", "i"), fill_value=-9.0)
        height[:] = 1.0
        file.createGroup("more").createVariable("text", str, ())[...] = "kept"
    return path


def dump(path):
    """Everything in a file, raw."""
    with netCDF4.Dataset(path) as file:
        file.set_auto_maskandscale(False)
        groups = {"": file, **file.groups}
        return {
            (group, name): (v.dtype, v.dimensions, v.filters(), {a: v.getncattr(a) for a in v.ncattrs()}, v[...])
            for group, content in groups.items()
            for name, v in content.variables.items()
        } | {("", "attributes"): {a: file.getncattr(a) for a in file.ncattrs()}}


def test_only_the_bed_changes(tmp_path, named):
    bed, names = named
    source = initial_file(tmp_path / "initial.nc", records=3)
    before = source.read_bytes()
    write_into(bed, names, source, tmp_path / "copy.nc", record=1)
    assert source.read_bytes() == before
    old, new = dump(source), dump(tmp_path / "copy.nc")
    assert list(old) == list(new)
    assert old["", "attributes"] == new["", "attributes"]
    for key in list(old)[:-1]:
        for i in range(4):
            assert str(old[key][i]) == str(new[key][i])
        if key[1].startswith("share_"):
            np.testing.assert_array_equal(old[key][4][[0, 2]], new[key][4][[0, 2]])
            np.testing.assert_array_equal(new[key][4][1], bed[key[1]].values.astype(np.float32))
        elif key[1] == "bed_height":
            np.testing.assert_array_equal(new[key][4], bed["bed_height"].values)
        else:
            np.testing.assert_array_equal(old[key][4], new[key][4])


def test_land_takes_the_files_own_fill_value(tmp_path, named):
    bed, names = named
    bed["bed_height"].values[:, 8, 0] = np.nan
    write_into(bed, names, initial_file(tmp_path / "initial.nc"), tmp_path / "copy.nc")
    with netCDF4.Dataset(tmp_path / "copy.nc") as file:
        file.set_auto_maskandscale(False)
        assert file["bed_height"][:, 8, 0].tolist() == [-9.0, -9.0]


@pytest.mark.parametrize(
    ("settings", "record", "message"),
    [
        ({"records": 3}, None, 'initial.nc: "share_mud" has 3 records along tick; say which one to fill'),
        ({"records": 3}, 3, "has 3 records along tick, asked for 3"),
        ({"layers": 5}, None, 'initial.nc: "share_mud" has 5 along strat, the bed has 2'),
        ({"rows": 4}, None, "has 4 along j, the bed has 9; it was made for another grid"),
        ({"leave_out": ("share_sand",)}, None, 'initial.nc: has no variable "share_sand", found warmth'),
    ],
)
def test_what_does_not_fit_writes_nothing(tmp_path, named, settings, record, message):
    bed, names = named
    source = initial_file(tmp_path / "initial.nc", **settings)
    with pytest.raises(RecipeError, match=message):
        write_into(bed, names, source, tmp_path / "copy.nc", record)
    assert not (tmp_path / "copy.nc").exists()


def test_other_files_are_refused(tmp_path, named):
    bed, names = named
    (tmp_path / "initial.nc").write_text("words")
    with pytest.raises(RecipeError, match=r"initial.nc: cannot be read as NetCDF"):
        write_into(bed, names, tmp_path / "initial.nc", tmp_path / "copy.nc")


def test_packed_integers_too_few_for_the_bed(tmp_path, named):
    bed, names = named
    bed["bed_height"].values[:] = 900.0  # int8 in steps of 0.5 m ends at 63.5 m
    source = initial_file(tmp_path / "initial.nc")
    with netCDF4.Dataset(source, "r+") as file:
        file.renameVariable("bed_height", "other")
        packed = file.createVariable("bed_height", "i1", ("strat", "j", "i"))
        packed.scale_factor = 0.5
    with pytest.raises(OutputError, match=r'"bed_height" is packed as int8 .* cannot hold values from 900 to 900'):
        write_into(bed, names, source, tmp_path / "copy.nc")
