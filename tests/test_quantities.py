"""Further numbers: read, mapped on their own scale, held out on the composition's folds, and written."""

import tomllib

import geopandas
import numpy as np
import pandas as pd
import pytest
import rasterio
import tomli_w
import xarray as xr
from pydantic import ValidationError
from shapely.geometry import box

from texture import build
from texture.errors import RecipeError, SampleError
from texture.output import check_cf
from texture.pipeline import intake, validate
from texture.predict import Kriging
from texture.recipe.file import read_recipe
from texture.recipe.quantities import TAKEN_NAMES, Quantity
from texture.stations.account import TABLE_COLUMNS
from texture.structure import Covariance
from texture.structure.averaging import averaged_out, sampling_distance_m

CARBON = {"name": "organic_carbon", "unit": "percent", "column": "OC", "scale": "log"}


@pytest.fixture(scope="module")
def built(tmp_path_factory, small_in):
    folder = tmp_path_factory.mktemp("carbon")
    return build(write_carbon(small_in(folder)), output=folder / "out")


@pytest.fixture
def with_carbon(small):
    return write_carbon(small)


def write_carbon(small):
    """The small recipe with carbon that follows the mud, lognormal; one cell blank, one below a limit."""
    rng = np.random.default_rng(11)
    table = pd.read_csv(small.parent / "grabs.csv")
    carbon = 2.0 * table["mud"] ** 0.8 * np.exp(rng.normal(0.0, 0.1, len(table)))
    texts = carbon.round(3).astype(str)
    texts[3], texts[7], texts[9] = "", "<0.2", "0"
    table["OC"] = texts
    table["carbonate, %"] = (20.0 + 60.0 * (1 - table["mud"])).round(1)
    table.to_csv(small.parent / "grabs.csv", index=False)
    recipe = tomllib.loads(small.read_text())
    recipe["quantities"] = [CARBON, {"name": "carbonate", "unit": "percent", "scale": "logit"}]
    recipe["samples"][0]["quantities"] = {"carbonate": "carbonate, %"}
    recipe["rim"]["classes"] = {"sand": 1.0}
    small.write_text(tomli_w.dumps(recipe))
    return small


def test_numbers_are_read_with_every_cell_that_is_not_plain_in_the_audit(with_carbon, tmp_path):
    found = intake(with_carbon, output=tmp_path / "out")
    table = found.stations.table
    assert table["organic_carbon"].isna().sum() == 2
    assert table.loc[7, "organic_carbon"] == pytest.approx(0.13)  # 0.65 of the limit
    assert table.loc[7, "organic_carbon_half_width"] == pytest.approx(0.1)
    audit = found.stations.audit
    rules = audit[audit["column"] == "OC"].set_index("row")["rule"]
    assert rules.loc[9].startswith("below a limit")  # rows are numbered as the file shows them, its heading in row 1
    assert 'scale = "log" needs numbers above 0' in rules.loc[11]
    assert any("1 values of organic_carbon left out" in note for note in found.stations.notes)
    assert any("carbonate: 30 of 30 stations have it, in percent" in note for note in found.stations.notes)
    assert "organic_carbon" in pd.read_csv(tmp_path / "out" / "stations.csv").columns


def test_the_map_of_a_number_is_that_of_its_column_alone(built):
    """Fit and kriging by hand, without any of the joints; the lognormal mean is Aitchison & Brown's (1957)."""
    result, carbon = built, built.quantities[0]
    table = result.found.stations.table
    known = table["organic_carbon"].notna().to_numpy()
    points = result.found.plane.to_metres(table["longitude"].to_numpy(), table["latitude"].to_numpy())[known]
    value, half = (table.loc[known, c].to_numpy() for c in ("organic_carbon", "organic_carbon_half_width"))
    noise = ((half / value) ** 2 / 3.0)[:, None]
    structure = Covariance.fit(points, np.log(value)[:, None], noise_variance=noise)
    factor = carbon.model.methods[0].factor  # of its own held-out errors, on every variance
    assert factor != 1.0
    structure = structure.scaled(np.array([factor]))
    kriging = Kriging(structure).fit(points, np.log(value)[:, None], noise_variance=factor * noise)
    target = result.found.target
    assert result.points_per_side == 1
    mean, variance = kriging.predict(result.found.some_centres(10**6))
    expected = np.exp(mean[:, 0] + 0.5 * variance[:, 0])
    np.testing.assert_allclose(carbon.mean[target.active], expected, rtol=1e-9)
    gone = averaged_out(np.sqrt(target.area_m2[target.active]), sampling_distance_m(points))
    inside = np.minimum(variance[:, 0], structure[0].small_scale * gone)
    median = np.exp(mean[:, 0] + 0.5 * inside)
    np.testing.assert_allclose(carbon.quantiles[1, target.active], median, rtol=1e-9)
    assert (np.diff(carbon.quantiles[:, target.active], axis=0) >= 0.0).all()


def test_files_hold_the_numbers_and_their_scores(built):
    result, out, wet = built, built.found.recipe.output, built.found.target.active
    scores = pd.read_csv(out / "validation.csv")
    own = scores[(scores["part"] == "organic_carbon") & (scores["score"] == "rmse")].set_index("method")["value"]
    assert set(own.index) == {"kriging", "nearest", "inverse_distance"}
    assert own["kriging"] < own["nearest"]  # carbon follows a smooth mud
    held_out = pd.read_csv(out / "held_out.csv")
    one = held_out[held_out["method"] == "kriging"]
    error = one["organic_carbon_predicted"] - one["organic_carbon_measured"]
    assert np.sqrt((error**2).mean()) == pytest.approx(own["kriging"], rel=1e-9)
    assert error.notna().sum() == 28
    with xr.open_dataset(out / "texture.nc") as data:
        carbon = data["organic_carbon"]
        assert carbon.attrs["units"] == "percent"
        assert carbon.attrs["support"].startswith("value at the cell centre")
        assert data["organic_carbon_evidence"].attrs["flag_meanings"].startswith("not_in_the_map")
        assert float(data["carbonate_quantile"].max()) < 100.0
        ours = {f"{q}{end}" for q in ("organic_carbon", "carbonate") for end in ("", "_quantile", "_evidence")}
        for name in set(data.variables) - ours:
            with pytest.raises(ValidationError, match="is the name of something else"):
                Quantity(name=name, column="x")
    with rasterio.open(out / "geotiff" / "organic_carbon.tif") as image:
        assert image.units == ("percent",)
        pixels = image.read(1, masked=True)
        np.testing.assert_allclose(np.sort(pixels.compressed()), np.sort(result.quantities[0].mean[wet]), rtol=1e-6)
    page = (out / "report.html").read_text()
    assert "Further numbers" in page
    assert "organic carbon" in page
    assert check_cf(out / "texture.nc").verdict == "pass"
    assert {"organic_carbon", "carbonate"} <= set(result.summary()["scores"]["kriging"])


def test_methods_without_a_variance_map_numbers_too(with_carbon, tmp_path):
    found = validate(with_carbon, output=tmp_path / "out", overrides=["method.name=nearest", "validation.compare=[]"])
    method = found.quantities[0].methods[0]
    assert np.isnan(method.low).all()
    measured = found.quantities[0].measured
    said = method.predicted[np.isfinite(method.predicted)]
    assert np.isin(said.round(9), measured[np.isfinite(measured)].round(9)).all()  # a neighbour's own number


def test_methods_of_the_composition_alone_leave_numbers_blank(with_carbon, tmp_path):
    compare = ["nearest", "inverse_distance", "average"]
    found = validate(with_carbon, output=tmp_path / "out", validation={"count": 3, "compare": compare})
    assert found.validation.method == "kriging"
    table = pd.read_csv(tmp_path / "out" / "held_out.csv").set_index("method")
    assert table.loc["average", "organic_carbon_predicted"].isna().all()
    assert table.loc["average", "organic_carbon_measured"].notna().any()
    assert table.loc["kriging", "organic_carbon_predicted"].notna().any()


def test_numbers_keep_to_their_zones(with_carbon, tmp_path):
    """A hard edge half-way: each side is the kriging of its own stations."""
    east = box(505_000.0, 4_900_000.0, 510_000.0, 4_906_000.0)
    geopandas.GeoDataFrame(geometry=[east], crs="EPSG:32626").to_file(tmp_path / "east.gpkg")
    zone = {"name": "east", "polygons": str(tmp_path / "east.gpkg")}
    quick = {
        "validation": {"count": 3, "compare": []},
        "outputs": {"geotiff": False},
        "composition": {"zeros": "replace"},
    }
    result = build(with_carbon, output=tmp_path / "out", zones=[zone], rim=None, **quick)
    carbon, zones, target = result.quantities[0], result.found.mapper.zones, result.found.target
    mapper, rows = carbon.model.mapper, carbon.model.rows
    known = np.log(result.found.stations.table["organic_carbon"].to_numpy()[rows])
    place = result.found.plane.to_metres(target.longitude, target.latitude)
    width = result.found.stations.table["organic_carbon_half_width"].fillna(0.0).to_numpy()[rows]
    noise = carbon.model.methods[0].factor * (width / np.exp(known)) ** 2 / 3.0
    assert result.points_per_side == 1
    for i in (0, 1):
        own, cells = zones.stations.zone[rows] == i, target.active & (zones.cells.zone == i)
        alone = Kriging(mapper.structure).fit(carbon.model.points[own], known[own], noise_variance=noise[own])
        mean, variance = alone.predict(place[cells])
        np.testing.assert_allclose(carbon.mean[cells], np.exp(mean + 0.5 * variance)[:, 0], rtol=1e-9)


def test_medians_come_from_curves_or_the_laboratory_never_from_three_parts(tmp_path):
    head = "id,longitude,latitude,>2 mm,1-2 mm,0.5-1 mm,0.25-0.5 mm,0.125-0.25 mm,0.063-0.125 mm,<0.063 mm\n"
    rows = [f"a{i},3.{i}1,54.{i}2,0,0,20,{30 + i},{30 - i},20,0\n" for i in range(6)]
    (tmp_path / "sizes.csv").write_text(head + "".join(rows))
    parts = [f"b{i},3.{i}5,54.{i}5,50,50,0,{'2.5' if i else ''}\n" for i in range(6)]
    (tmp_path / "parts.csv").write_text("id,longitude,latitude,mud %,sand %,gravel %,median phi\n" + "".join(parts))
    recipe = {
        "samples": [{"file": "sizes.csv"}, {"file": "parts.csv"}],
        "target": {"bounds": [3.0, 54.0, 4.0, 55.0], "cell_size": 0.1, "crs": "EPSG:4326"},
        "quantities": [{"name": "median_grain_phi", "curve": "median_phi"}],
    }
    (tmp_path / "recipe.toml").write_text(tomli_w.dumps(recipe))
    table = intake(tmp_path / "recipe.toml").stations.table
    # Straight between limits the median of row i would be 2 phi + (50 - 20 - 30 - i) / (30 - i) and so on; the curve is smooth.
    assert table["median_grain_phi"].iloc[0] == pytest.approx(2.0, abs=1e-9)  # 20 + 30 = 50 at the limit of 0.25 mm
    assert table["median_grain_phi"].iloc[1:6].between(1.8, 2.0).all()
    np.testing.assert_allclose(table["median_grain_phi"].iloc[6:], [np.nan, 2.5, 2.5, 2.5, 2.5, 2.5])


@pytest.mark.parametrize(
    ("override", "words"),
    [
        ("quantities.0.name=mud", 'name: "mud" is the name of something else'),
        ("quantities.0.name=Organic carbon", "quantities\\[0\\].name"),
        ("quantities.0.curve=median_phi", "give column or curve, not both"),
        ("quantities.0.upper=3", 'upper counts for scale = "logit" alone'),
        ("quantities.1.name=organic_carbon", 'the name "organic_carbon" is given twice'),
        ("samples.0.quantities={carbonat='x'}", '"carbonat" is not among the quantities; did you mean "carbonate"'),
        ("samples.0.quantities={}", 'quantities "carbonate": give column'),
    ],
)
def test_each_mistake_has_its_line(with_carbon, override, words):
    with pytest.raises(RecipeError, match=words):
        read_recipe(with_carbon, [override])


def test_a_number_that_no_file_has(with_carbon, tmp_path):
    with pytest.raises(
        SampleError, match=r'"organic_carbon": 0 of 30 stations have it, expected at least 5; look at the column "Corg"'
    ):
        intake(with_carbon, overrides=["quantities.0.column=Corg"], output=tmp_path / "out")
    with pytest.raises(
        SampleError, match=r'no column "carbonat %", expected the heading .* for carbonate; did you mean "carbonate, %"'
    ):
        intake(with_carbon, overrides=["samples.0.quantities={carbonate='carbonat %'}"], output=tmp_path / "out")


def test_names_of_the_tables_are_taken():
    assert set(TABLE_COLUMNS) <= TAKEN_NAMES
