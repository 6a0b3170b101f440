"""What a names file does to numbers and shapes: units by name, time, halo, text; there and back."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from texture.bed import make_bed
from texture.errors import RecipeError
from texture.output import apply_names, bed_dataset, cell_table, open_bed, read_names, write_cells, write_netcdf
from texture.output.names import Names
from texture.output.units import FACTORS, find_conversion

from .conftest import COLUMNS, NORTH, ROWS, SIZE, WEST, make_curvilinear, make_estimate, make_raster, make_recipe
from .test_names import named

RASTER, CURVED = make_raster(), make_curvilinear()
BEDS = {
    target.kind: bed_dataset(
        make_bed(estimate.fractions, estimate.evidence, target, make_recipe().bed, make_recipe().rim),
        target,
        make_recipe(),
    )
    for target, estimate in ((t, make_estimate(t)) for t in (RASTER, CURVED))
}


def test_units_by_name(tmp_path):
    plain, _ = named(
        tmp_path,
        """
        [variables]
        grain_diameter = { name = "size", units = "phi" }
        class_fraction = { name = "share", units = "percent" }
        erodible_thickness = { name = "height", units = "mm" }
        dry_density = { name = "weight", units = "ounce per pint", scale = 0.5, attributes = { origin = "bed", part = 3 } }
        """,
    )
    with xr.open_dataset(tmp_path / "bed.nc") as back:
        # 20 µm = 2^-5.6439 mm, 250 µm = 2^-2 mm, 8 mm = 2^3 mm (Krumbein 1934: phi = -log2 of mm)
        np.testing.assert_allclose(back["size"].values, [5.643856, 2.0, -3.0], atol=1e-6)
        assert back["size"].attrs["units"] == "phi"
        np.testing.assert_allclose(back["share"].sum("class"), 100.0, rtol=1e-14)
        assert np.unique(back["height"].values.round(9)).tolist() == [0.0, 100.0, 900.0]
        np.testing.assert_array_equal(back["weight"].values, plain["dry_density"].values * 0.5)
        assert (back["weight"].attrs["origin"], back["weight"].attrs["part"]) == ("bed", 3)


@pytest.mark.parametrize(("ours", "theirs"), [(o, t) for o, known in FACTORS.items() for t in known] + [("m", "phi")])
def test_every_unit_goes_there_and_back(ours, theirs):
    change = find_conversion(ours, theirs, is_diameter=ours == "m")
    values = np.array([1e-6, 0.3, 1.0, 2650.0])
    np.testing.assert_allclose(change.back(change.there(values)), values, rtol=1e-12)
    assert change.there(values.astype(np.float32)).dtype == np.float32


def test_factors_by_hand():
    assert find_conversion("kg m-2", "g cm-2").there(np.array([10.0])) == pytest.approx([1.0])
    assert find_conversion("Pa", "dyn cm-2").there(np.array([0.1])) == pytest.approx([1.0])
    assert find_conversion("kg m-3", "g cm-3").there(np.array([1590.0])) == pytest.approx([1.59])
    assert find_conversion("kg m-2 s-1", "g cm-2 s-1").there(np.array([5e-5])) == pytest.approx([5e-6])


def test_time_of_length_one(tmp_path):
    named(
        tmp_path,
        """
        [variables]
        class_fraction = { name = "share_{class}", split = "class", order = ["layer", "time", "row", "column"] }
        erodible_thickness = { name = "height" }
        grain_diameter = { name = "size" }
        [time]
        name = "tick"
        units = "hours since 2001-01-01 00:00"
        value = 6.0
        """,
    )
    with xr.open_dataset(tmp_path / "bed.nc") as back:
        assert back["share_sand"].dims == ("layer", "tick", "row", "column")
        assert back["height"].dims == ("tick", "layer", "row", "column")
        assert back["size"].dims == ("class",)
        assert back["porosity"].dims == ("layer", "row", "column")
        assert back["tick"].values[0] == np.datetime64("2001-01-01T06:00")
    ours = open_bed(tmp_path / "bed.nc", tmp_path / "names.toml")
    assert ours["class_fraction"].dims == ("class", "layer", "row", "column")


@pytest.mark.parametrize("fill", ["copy", "land"])
def test_halo_of_a_raster(tmp_path, fill):
    text = f'[halo]\ncells = 2\nfill = "{fill}"\n[values]\nland = -9999.0\n'
    plain, _ = named(tmp_path, text, RASTER)
    with xr.open_dataset(tmp_path / "bed.nc") as back:
        assert back["class_fraction"].shape == (3, 2, ROWS + 4, COLUMNS + 4)
        np.testing.assert_allclose(back["x"].values[:2], [WEST - 1.5 * SIZE, WEST - 0.5 * SIZE])
        np.testing.assert_allclose(back["y"].values[-1], NORTH - (ROWS + 1.5) * SIZE)
        np.testing.assert_allclose(back["x_bounds"].values[0], [WEST - 2 * SIZE, WEST - SIZE])
        edge, halo = plain["class_fraction"].values[:, :, 5, -1], back["class_fraction"].values[:, :, 7, -1]
        np.testing.assert_array_equal(halo, edge if fill == "copy" else np.full_like(edge, np.nan))
        assert back["water"].values[7, -1] == (fill == "copy")
        assert back["evidence"].values[0, 7, -1] == (plain["evidence"].values[0, 5, -1] if fill == "copy" else 0)


def test_halo_runs_on_across_the_date_line():
    from texture.output.halo import pad

    longitude = np.array([[179.0, -179.0, -177.0]] * 2)
    data = xr.Dataset({"longitude": (("row", "column"), longitude)})
    padded = pad(data, ("row", "column"), 1, "copy", {"longitude"})["longitude"].values
    assert padded.shape == (4, 5)
    assert padded[1].tolist() == [177.0, 179.0, -179.0, -177.0, -175.0]


def test_a_list_of_cells_has_no_halo():
    data = BEDS["raster"].stack(cell=("y", "x")).reset_index("cell").drop_vars(["x_bounds", "y_bounds"])
    with pytest.raises(RecipeError, match=r"names.toml: halo: this bed lies on cell alone"):
        apply_names(data, Names.model_validate({"halo": {"cells": 1}}), "names.toml")


@st.composite
def names_files(draw):
    """Any names file that makes sense."""
    kind = draw(st.sampled_from(["raster", "curvilinear"]))
    cells = ["y", "x"] if kind == "raster" else ["row", "column"]
    words = draw(st.permutations(["sort", "strat", "j", "i", "tick"]))
    renamed = draw(st.sets(st.sampled_from(["class", "layer", *cells])))
    content = {"dimensions": {d: w for d, w in zip(["class", "layer", *cells], words, strict=False) if d in renamed}}
    timed = draw(st.booleans())
    if timed:
        content["time"] = {"name": words[4]} | draw(
            st.sampled_from([{}, {"units": "days since 2000-01-01", "value": 3.5}])
        )
    split, only = draw(st.booleans()), draw(st.booleans())
    own = [*([] if split else ["class"]), "layer", *cells, *(["time"] if timed and draw(st.booleans()) else [])]
    fraction = {"name": "share_{number:02d}" if split else "share", "order": draw(st.permutations(own))}
    fraction |= {"split": "class"} if split else {}
    fraction |= draw(st.sampled_from([{}, {"units": "percent"}, {"units": "odd", "scale": 1000.0}]))
    size = {"name": "size"} | draw(st.sampled_from([{}, {"units": "phi"}, {"units": "um"}]))
    content["variables"] = {
        "class_fraction": fraction,
        "mixture_median_diameter": size | {"attributes": {"origin": "here"}},
        "erodible_thickness": {"name": "height", "order": draw(st.permutations(["layer", *cells]))},
        "water": {"name": "wet"},
    }
    land = draw(st.sampled_from([None, -9999.0, 1e20]))
    order = draw(st.sampled_from(["top_first", "bottom_first"]))
    content["values"] = {"layer_order": order, "only_named": only} | ({} if land is None else {"land": land})
    if draw(st.booleans()):
        fill = draw(st.sampled_from(["copy"] if land is None else ["copy", "land"]))
        content["halo"] = {"cells": draw(st.integers(1, 3)), "fill": fill}
    return kind, content


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(names_files())
def test_any_names_file_can_be_read_back(tmp_path, given_names):
    import tomli_w

    kind, content = given_names
    plain = BEDS[kind]
    (tmp_path / "names.toml").write_text(tomli_w.dumps(content))
    names = read_names(tmp_path / "names.toml", plain["water"].dims)
    write_netcdf(apply_names(plain, names, "names.toml"), tmp_path / "bed.nc")
    back = open_bed(tmp_path / "bed.nc", names)
    wet = plain["water"].values == 1
    for name in ("class_fraction", "mixture_median_diameter", "erodible_thickness", "water", "porosity", "evidence"):
        if name in ("porosity", "evidence") and content["values"]["only_named"]:
            assert name not in back
            continue
        assert back[name].dims == plain[name].dims, name
        np.testing.assert_allclose(back[name].values[..., wet], plain[name].values[..., wet], rtol=1e-13)
        assert back[name].attrs.get("units") == plain[name].attrs.get("units")
    assert back["water"].shape == plain["water"].shape
    for name in plain.coords:
        if plain[name].dtype.kind == "f":
            np.testing.assert_array_equal(back[name].values, plain[name].values)


def test_text_table_in_cell_order(tmp_path):
    plain = BEDS["curvilinear"]
    write_cells(tmp_path / "bed.csv", plain, ("row", "column"))
    table = pd.read_csv(tmp_path / "bed.csv")
    assert table.shape[0] == ROWS * COLUMNS
    assert table["row_number"].tolist() == np.repeat(np.arange(1, ROWS + 1), COLUMNS).tolist()
    assert table["column_number"].tolist()[: COLUMNS + 1] == [*range(1, COLUMNS + 1), 1]
    np.testing.assert_array_equal(table["class_fraction_sand_2"], plain["class_fraction"].values[1, 1].ravel())
    np.testing.assert_array_equal(table["longitude"], plain["longitude"].values.ravel())
    shares = [c for c in table if c.startswith("class_fraction_") and c.endswith("_1")]
    np.testing.assert_allclose(table[shares].sum(axis=1), 1.0, atol=1e-12)
    assert np.isfinite(table.to_numpy()).all()


def test_text_table_through_a_names_file():
    names = Names.model_validate(
        {
            "dimensions": {"row": "j"},
            "variables": {"class_fraction": {"name": "share_{class}", "split": "class", "order": ["layer", "column", "row"]}},
            "values": {"land": -1.0, "only_named": True},
        }
    )  # fmt: skip
    table = cell_table(apply_names(BEDS["curvilinear"], names), ("j", "column"))
    assert {"share_mud_1", "share_sand_2"} <= set(table.columns)
    wet = BEDS["curvilinear"]["water"].values.ravel() == 1
    np.testing.assert_array_equal(
        table["share_mud_2"][wet], BEDS["curvilinear"]["class_fraction"].values[0, 1].ravel()[wet]
    )
    assert table["share_mud_2"][~wet].isna().all()


def test_a_mesh_under_other_names_is_still_one(tmp_path, demo_recipe):
    """UGRID's roles follow the new names of variables and dimensions; judged by the standard's own checker."""
    import subprocess
    import sys
    from pathlib import Path

    from texture.bed import check_bed
    from texture.output import bed_arrays
    from texture.recipe import TargetSettings
    from texture.targets import read_target

    target = read_target(TargetSettings(file=demo_recipe.parent / "model_mesh.nc"))
    estimate, recipe = make_estimate(target), make_recipe()
    bed = make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim)
    (tmp_path / "names.toml").write_text(
        """
        [dimensions]
        mesh_face = "element"
        mesh_node = "knot"
        [variables]
        mesh_face_nodes = { name = "knots_of_element" }
        mesh_node_longitude = { name = "knot_x" }
        class_fraction = { name = "share_{class}", split = "class", order = ["mesh_face", "layer"] }
        [values]
        only_named = true
        """
    )
    names = read_names(tmp_path / "names.toml", target.dims)
    write_netcdf(apply_names(bed_dataset(bed, target, recipe), names, "names.toml"), tmp_path / "bed.nc")
    checker = Path(sys.executable).parent / "ugrid-checker"
    said = subprocess.run([checker, tmp_path / "bed.nc"], capture_output=True, text=True, check=True).stdout
    assert "No problems found" in said
    back = open_bed(tmp_path / "bed.nc", names)
    np.testing.assert_allclose(back["class_fraction"].values, bed.class_fraction, atol=1e-15)
    assert {c.name: c.verdict for c in check_bed(bed_arrays(back))}["isolated water"] == "pass"


def test_a_raster_s_table_tells_where_each_row_lies():
    table = cell_table(BEDS["raster"], ("y", "x"))
    assert table["x"][COLUMNS + 2] == WEST + 2.5 * SIZE
    assert table["y"][COLUMNS + 2] == NORTH - 1.5 * SIZE
    assert table.loc[COLUMNS + 2, ["row_number", "column_number"]].tolist() == [2, 3]
