import numpy as np
import pytest
import xarray as xr

from texture.bed import make_bed
from texture.errors import RecipeError
from texture.output import apply_names, bed_dataset, open_bed, read_names, write_netcdf

from .conftest import COLUMNS, ROWS, make_curvilinear, make_estimate, make_raster, make_recipe

FULL = """
[dimensions]
class = "sort"
layer = "strat"
row = "j"
[variables]
class_fraction = { name = "share_of_{class}", split = "class", order = ["layer", "column", "row"], units = "percent", scale = 100.0 }
class_mass_content = { name = "load_{number:02d}", split = "class" }
erodible_thickness = { name = "bed_height", units = "mm", scale = 1000.0 }
longitude = { name = "place_x" }
crs = { name = "map_system" }
[values]
land = -9999.0
layer_order = "bottom_first"
"""


def named(tmp_path, text, target=None):
    target = target or make_curvilinear()
    recipe, estimate = make_recipe(), make_estimate(target)
    bed = make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim)
    (tmp_path / "names.toml").write_text(text)
    names = read_names(tmp_path / "names.toml", target.dims)
    plain = bed_dataset(bed, target, recipe)
    write_netcdf(apply_names(plain, names, "names.toml"), tmp_path / "bed.nc")
    return plain, target


def test_names_order_units_land_and_layers(tmp_path):
    plain, target = named(tmp_path, FULL)
    with xr.open_dataset(tmp_path / "bed.nc", mask_and_scale=False) as raw:
        share = raw["share_of_sand"]
        assert share.dims == ("strat", "column", "j")
        assert share.attrs["units"] == "percent"
        assert share.attrs["long_name"].endswith(": sand")
        wet = target.active.reshape(ROWS, COLUMNS)
        expected = 100.0 * plain["class_fraction"].values[1]
        np.testing.assert_allclose(share.values[-1].T[wet], expected[0][wet], rtol=1e-15)  # the top is last
        assert (share.values[:, ~wet.T] == -9999.0).all()
        assert share.attrs["_FillValue"] == -9999.0
        assert raw["bed_height"].values[0][wet] == pytest.approx(900.0)
        assert raw["bed_height"].attrs["units"] == "mm"
        assert raw["load_03"].dims == ("strat", "j", "column")
        assert raw["strat"].values.tolist() == [2, 1]
        assert "class_fraction" not in raw
        assert raw["dry_density"].dims == ("strat", "j", "column")  # not listed: its own name
        assert share.encoding["coordinates"] == "place_x latitude"
        assert share.attrs["grid_mapping"] == "map_system"
        assert raw["settling_velocity"].dims == ("sort",)
        for name in ("place_x", "latitude", "longitude_bounds"):  # land has a place too
            assert np.isfinite(raw[name].values).all()
            assert np.abs(raw[name].values).max() < 90.0


def test_read_back_through_the_names_file(tmp_path):
    plain, target = named(tmp_path, FULL)
    back = open_bed(tmp_path / "bed.nc", tmp_path / "names.toml")
    wet = target.active.reshape(ROWS, COLUMNS)
    assert back["class_name"].values.tolist() == ["mud", "sand", "gravel"]
    for name in ("class_fraction", "class_mass_content", "erodible_thickness", "dry_density", "evidence"):
        assert back[name].dims == plain[name].dims
        assert back[name].attrs.get("units") == plain[name].attrs.get("units")
        np.testing.assert_allclose(back[name].values[..., wet], plain[name].values[..., wet], rtol=1e-14)
    assert back["layer"].values.tolist() == [1, 2]
    assert np.isnan(back["class_fraction"].values[..., ~wet]).all()


def test_only_named_keeps_the_place_on_earth(tmp_path):
    named(
        tmp_path,
        """
        [dimensions]
        y = "northing"
        [variables]
        class_fraction = { name = "share_{class}", split = "class", order = ["y", "x", "layer"] }
        [values]
        only_named = true
        """,
        make_raster(),
    )
    with xr.open_dataset(tmp_path / "bed.nc", decode_coords="all") as back:
        assert set(back.data_vars) == {"share_mud", "share_sand", "share_gravel"}
        assert set(back.variables) - set(back.data_vars) == {"northing", "x", "layer", "crs", "x_bounds", "y_bounds"}
        assert back["share_mud"].dims == ("northing", "x", "layer")
        assert "ancillary_variables" not in back["share_mud"].attrs
    assert open_bed(tmp_path / "bed.nc", tmp_path / "names.toml")["class_fraction"].dims == ("class", "layer", "y", "x")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ('[dimensions]\nlayr = "a"', 'names.toml: dimensions: unknown "layr"; did you mean "layer"?'),
        ('[dimension]\nlayer = "a"', 'names.toml: unknown key "dimension"; did you mean "dimensions"?'),
        ('[variables]\nclass_fractions = { name = "a" }', 'unknown "class_fractions"; did you mean "class_fraction"?'),
        ('[variables]\nporosity = { nam = "a" }', 'unknown key "variables.porosity.nam"; did you mean "name"?'),
        ('[values]\nlnd = 1.0', 'unknown key "values.lnd"; did you mean "land"?'),
        ('[values]\nlayer_order = "up"', "values.layer_order: Input should be 'top_first' or 'bottom_first'"),
        ('[variables]\nporosity = { name = "2 b" }', '"2 b" is no NetCDF name'),
        ('[variables]\nclass_fraction = { name = "a_{cls}", split = "class" }', "unknown placeholder {cls}"),
        ('[variables]\nclass_fraction = { name = "a", split = "class" }', "the same for every class"),
        ('[variables]\nclass_fraction = { name = "a_{class}" }', 'split = "class" is missing'),
        ('[variables]\nporosity = { name = "a", scale = 100.0 }', "scale: give units beside it"),
        ('[variables]\nporosity = { name = "a", order = ["row", "sort"] }', 'variables.porosity.order: unknown "sort"'),
        ('[variables]\nporosity = { name = "a", order = ["row", "column"] }', "expected its own dimensions in some order"),
        ('[variables]\nporosity = { name = "a_{class}", split = "class" }', 'has no dimension "class" to split'),
        ('[variables]\nporosity = { name = "dry_density" }', 'two variables would be called "dry_density"'),
        ('[variables]\nevidence = { name = "a", scale = 2.0, units = "1" }', "not flags or names"),
        ('[variables]\nlayer = { name = "a" }\n[dimensions]\nlayer = "b"', "a coordinate variable has its dimension's name"),
        ('[variables]\nlayer = { name = "a" }', "a coordinate variable has its dimension's name"),
        ('[variables]\nerosion_rate_per_stress = { name = "a" }', '"erosion_rate_per_stress" is not in this bed'),
        ('[variables]\nporosity = "a"', "variables.porosity: found 'a', expected a table such as { name = "),
        ("[variables", "names.toml: not TOML"),
        ('[variables]\nporosity = { name = "a", units = "percnt" }', 'variables.porosity.units: "percnt" is no unit that "1" can be turned into; did you mean "percent"?'),
        ('[variables]\nporosity = { name = "a", units = "phi" }', '"phi" is no unit that "1" can be turned into'),
        ('[variables]\nporosity = { name = "a", attributes = { units = "b" } }', "attributes.units: belongs to the file's structure; use the key units"),
        ('[time]\nname = "t"\nunits = "days"\nvalue = 0.0', "time.units: String should match"),
        ('[time]\nname = "t"\nvalue = 0.0', "time: give value and units together"),
        ('[time]\nname = "t"\nvariables = ["porsity"]', 'time.variables: unknown "porsity"; did you mean "porosity"?'),
        ('[time]\nname = "t"\nvariables = ["settling_velocity"]', '"settling_velocity" does not lie on the cells'),
        ('[time]\nname = "row"', 'time.name: "row" is taken already'),
        ('[halo]\ncells = 0', "halo.cells: Input should be greater than or equal to 1"),
        ('[halo]\ncells = 1\nfill = "land"', 'halo.fill: "land" needs values.land'),
        ('[halo]\nwidth = 1\ncells = 1', 'unknown key "halo.width"'),
    ],
)  # fmt: skip
def test_mistakes_are_named(tmp_path, text, message):
    import re

    with pytest.raises(RecipeError, match=re.escape(message)):
        named(tmp_path, text)


def test_strength_that_no_bed_has(tmp_path):
    target, weak = make_curvilinear(), make_recipe(bed={})
    estimate = make_estimate(target)
    data = bed_dataset(make_bed(estimate.fractions, estimate.evidence, target, weak.bed), target, weak)
    (tmp_path / "n.toml").write_text('[variables]\ncritical_stress_for_erosion = { name = "strength" }')
    with pytest.raises(RecipeError, match=r"give erosion.critical_stress_pa for every class"):
        apply_names(data, read_names(tmp_path / "n.toml", target.dims), "n.toml")


def test_a_missing_file_is_one_line(tmp_path):
    with pytest.raises(RecipeError, match=r"absent.toml: cannot be read"):
        read_names(tmp_path / "absent.toml")
