"""Written, reopened, compared: values, places, meanings."""

import shutil
import subprocess

import numpy as np
import pyproj
import pytest
import xarray as xr

from texture.bed import EVIDENCE, make_bed
from texture.errors import BedError
from texture.output import bed_dataset, open_bed, texture_dataset, write_netcdf

from .conftest import CLASS_WORDS, COLUMNS, NORTH, ROWS, SIZE, WEST, make_curvilinear, make_raster, make_recipe

COORDINATES = ["ln(mud / (sand + gravel))", "ln(gravel / sand)"]


@pytest.fixture
def bed_path(tmp_path, bed, target, recipe):
    write_netcdf(bed_dataset(bed, target, recipe), tmp_path / "bed.nc")
    return tmp_path / "bed.nc"


@pytest.fixture
def texture_path(tmp_path, estimate, target, recipe):
    data = texture_dataset(estimate, target, recipe, CLASS_WORDS, COORDINATES, {"support": "mean over a cell"})
    write_netcdf(data, tmp_path / "texture.nc")
    return tmp_path / "texture.nc"


def test_bed_values_come_back(bed_path, bed, target):
    back = xr.open_dataset(bed_path)
    for name in ("class_fraction", "class_mass_content", "erodible_thickness", "dry_density", "porosity",
                 "mixture_median_diameter", "skin_roughness_length", "critical_stress_for_erosion", "evidence",
                 "rim_weight"):  # fmt: skip
        expected = getattr(bed, name)
        assert back[name].dtype == expected.dtype
        assert back[name].dims[-2:] == target.dims
        np.testing.assert_array_equal(back[name].values.reshape(expected.shape), expected)
    assert back["class_fraction"].dims[:2] == ("class", "layer")
    assert np.abs(back["class_fraction"].sum("class") - 1.0).max() <= 1e-12
    assert back["class_name"].values.tolist() == ["mud", "sand", "gravel"]
    assert back["class_part"].values.tolist() == ["mud", "sand", "gravel"]
    assert back["settling_velocity"].values == pytest.approx(bed.classes.settling_velocity_m_s)
    assert np.isnan(back["erosion_rate"].values).tolist() == [False, True, True]
    np.testing.assert_array_equal(back["water"].values.ravel() == 1, target.active)
    assert back.attrs["Conventions"] == "CF-1.11"
    assert back.attrs["title"] == "Kestrel Bight, starting bed"


def test_no_cell_is_missing(bed_path):
    raw = xr.open_dataset(bed_path, mask_and_scale=False)
    for name, variable in raw.variables.items():
        if "layer" in variable.dims and name != "layer":
            assert "_FillValue" not in variable.attrs
            assert np.isfinite(variable.values).all()


def test_places_of_a_raster(tmp_path):
    target = make_raster()
    values = np.arange(target.n_cells, dtype=float)
    fractions = np.stack([values, values.max() - values, np.ones(values.size)], axis=1)
    fractions /= fractions.sum(axis=1, keepdims=True)
    bed = make_bed(fractions, np.ones(values.size), target, make_recipe().bed)
    write_netcdf(bed_dataset(bed, target, make_recipe()), tmp_path / "bed.nc")
    back = xr.open_dataset(tmp_path / "bed.nc", decode_coords="all")
    assert back["y"].values[0] == NORTH - SIZE / 2  # the centre, half a cell inside
    assert back["x"].values[0] == WEST + SIZE / 2
    assert back["y"].values[0] > back["y"].values[-1]
    np.testing.assert_array_equal(back["y_bounds"].values[0], [NORTH, NORTH - SIZE])
    at = back["class_fraction"].sel(x=WEST + 10.5 * SIZE, y=NORTH - 3.5 * SIZE, layer=1)
    assert at[0] == bed.class_fraction[0, 0, 3 * COLUMNS + 10]
    assert pyproj.CRS.from_cf(back["crs"].attrs) == pyproj.CRS.from_epsg(32633)


def test_places_of_a_curvilinear_grid(tmp_path):
    import cf_xarray  # noqa: F401  registers the accessor

    target, recipe = make_curvilinear(), make_recipe()
    fractions = np.random.default_rng(5).dirichlet([1, 1, 1], target.n_cells)
    bed = make_bed(fractions, np.ones(target.n_cells), target, recipe.bed)
    write_netcdf(bed_dataset(bed, target, recipe), tmp_path / "bed.nc")
    back = xr.open_dataset(tmp_path / "bed.nc")
    longitude, latitude = back["class_fraction"].cf["longitude"], back["class_fraction"].cf["latitude"]
    assert longitude.shape == (ROWS, COLUMNS)
    np.testing.assert_array_equal(longitude.values.ravel(), target.longitude)
    np.testing.assert_array_equal(latitude.values.ravel(), target.latitude)
    assert back["longitude_bounds"].dims == ("row", "column", "corner")
    assert "class_name" in back["class_fraction"].coords


def test_flags_have_words_without_brackets(bed_path, texture_path):
    for path, name in ((bed_path, "evidence"), (texture_path, "evidence"), (texture_path, "texture_class")):
        attributes = xr.open_dataset(path)[name].attrs
        words = attributes["flag_meanings"].split()
        assert len(words) == len(attributes["flag_values"])
        assert not set("()[]") & set(attributes["flag_meanings"])
    evidence = xr.open_dataset(bed_path)["evidence"].attrs
    assert evidence["flag_values"].tolist() == list(EVIDENCE)
    assert evidence["flag_meanings"].split()[3] == "rim"
    assert 3 not in xr.open_dataset(texture_path)["evidence"].attrs["flag_values"]


def test_texture_values_come_back(texture_path, estimate, target):
    back = xr.open_dataset(texture_path)
    for i, part in enumerate(("mud", "sand", "gravel")):
        np.testing.assert_array_equal(back[f"{part}_fraction"].values.ravel(), estimate.fractions[:, i])
        quantile = back[f"{part}_fraction_quantile"].sel(quantile=0.95)
        np.testing.assert_array_equal(quantile.values.ravel(), estimate.quantiles[2, :, i])
    np.testing.assert_array_equal(back["logratio_2_variance"].values.ravel(), estimate.variance[:, 1])
    np.testing.assert_array_equal(back["texture_class"].values.ravel(), estimate.texture_class)
    assert back.attrs["support"] == "mean over a cell"


def test_the_source_names_what_was_kriged(estimate, target, recipe):
    assert recipe.composition.logratio == "tree"
    picked = ("mud", "gravel / (sand + gravel)")  # held-out error may pick shares
    source = texture_dataset(estimate, target, recipe, CLASS_WORDS, picked).attrs["source"]
    assert "of mud, gravel / (sand + gravel) from grab samples" in source
    assert "tree" not in source


def test_a_method_without_variance_writes_no_quantiles(tmp_path, estimate, target, recipe):
    estimate.variance[:] = np.nan
    data = texture_dataset(estimate, target, recipe, CLASS_WORDS, COORDINATES)
    assert "mud_fraction_quantile" not in data
    assert "logratio_1_variance" not in data
    assert "quantile" not in data.dims


def test_the_same_bed_gives_the_same_bytes(tmp_path, bed, target, recipe):
    for name in ("one.nc", "two.nc"):
        write_netcdf(bed_dataset(bed, target, recipe), tmp_path / name)
    assert (tmp_path / "one.nc").read_bytes() == (tmp_path / "two.nc").read_bytes()


def test_a_bed_without_strength_leaves_the_mixture_out(target, estimate):
    weak = make_recipe(bed={})  # the default mud has no critical stress
    bed = make_bed(estimate.fractions, estimate.evidence, target, weak.bed)
    assert "critical_stress_for_erosion" not in bed_dataset(bed, target, weak)


def test_each_erosion_form_has_its_own_unit(target, estimate):
    blocks = make_recipe().bed.model_dump()
    blocks["classes"][1]["erosion"] = {"rate": 2e-4, "form": "excess_stress"}
    both = make_recipe(bed=blocks)
    data = bed_dataset(make_bed(estimate.fractions, estimate.evidence, target, both.bed), target, both)
    assert data["erosion_rate"].values.tolist()[0] == 5e-5
    assert data["erosion_rate_per_stress"].values.tolist()[1] == 2e-4
    assert np.isnan(data["erosion_rate"].values[1])
    assert data["erosion_rate_per_stress"].attrs["units"] == "kg m-2 s-1 Pa-1"


def test_open_bed_reads_and_refuses(bed_path, texture_path, bed, tmp_path):
    assert open_bed(bed_path)["class_fraction"].shape == (3, 2, ROWS, COLUMNS)
    with pytest.raises(BedError, match=r"texture.nc: has no variable class_fraction, found"):
        open_bed(texture_path)
    with pytest.raises(BedError, match="no such file"):
        open_bed(tmp_path / "absent.nc")
    (tmp_path / "words.nc").write_text("not NetCDF")
    with pytest.raises(BedError, match="cannot be read as NetCDF"):
        open_bed(tmp_path / "words.nc")


@pytest.mark.slow
@pytest.mark.filterwarnings("ignore::DeprecationWarning", "ignore::UserWarning", "ignore::ResourceWarning")
def test_the_compliance_checker_finds_nothing(bed_path, texture_path, tmp_path):
    from compliance_checker.runner import CheckSuite, ComplianceChecker

    CheckSuite.load_all_available_checkers()
    for path in (bed_path, texture_path):
        report = tmp_path / "report.txt"
        passed, errors = ComplianceChecker.run_checker(
            str(path), ["cf:1.11"], 2, "normal", output_filename=str(report), output_format="text"
        )
        assert not errors
        assert passed, report.read_text()
        assert "All tests passed!" in report.read_text()


@pytest.mark.tools
@pytest.mark.skipif(shutil.which("ncdump") is None, reason="ncdump is not installed (Debian package netcdf-bin)")
def test_ncdump_reads_the_header(bed_path):
    header = subprocess.run(["ncdump", "-h", str(bed_path)], capture_output=True, text=True, check=True).stdout
    assert "double class_fraction(class, layer," in header


def test_single_precision_sums_to_one_exactly_as_stored(tmp_path, bed, target):
    recipe = make_recipe(outputs={"precision": "float32"})
    write_netcdf(bed_dataset(bed, target, recipe), tmp_path / "bed.nc")
    with xr.open_dataset(tmp_path / "bed.nc") as back:
        assert back["class_fraction"].dtype == np.float32
        assert (back["class_fraction"].values.sum(axis=0) == np.float32(1.0)).all()
        for name in ("erodible_thickness", "class_mass_content", "grain_diameter"):
            assert back[name].dtype == np.float32
        for name in ("longitude", "x"):
            assert name not in back or back[name].dtype == np.float64
        np.testing.assert_allclose(back["dry_density"].values.ravel(), bed.dry_density.ravel(), rtol=6e-8)
