"""The demo's files are what its script makes, and are drawn from the truth they claim."""

import csv
import subprocess
import sys
import tomllib
from pathlib import Path

import cf_xarray  # noqa: F401  (registers the .cf accessor)
import geopandas as gpd
import numpy as np
import openpyxl
import pandas as pd
import pytest
import python_calamine
import rasterio
import shapely
import xarray as xr
from PIL import Image
from pyproj import Transformer
from scipy.special import logit

from demo_samples.kestrel_bight.make.fields import RandomField
from demo_samples.kestrel_bight.make.truth import bare_rock, depth_m, is_land, true_fractions

DEMO = Path(__file__).parents[2] / "demo_samples" / "kestrel_bight"


@pytest.fixture(scope="module")
def grid():
    with xr.open_dataset(DEMO / "model_grid.nc") as dataset:
        return dataset.load()


@pytest.fixture(scope="module")
def answers():
    return pd.read_csv(DEMO / "answers.csv", dtype={"id": str, "sheet": str})


@pytest.fixture(scope="module")
def survey_2004():
    table = pd.read_csv(DEMO / "survey_2004.csv", sep=";", decimal=",", encoding="cp1252")
    transformer = Transformer.from_crs("EPSG:32626", "EPSG:4326", always_xy=True)
    table["x"], table["y"] = transformer.transform(table["Easting [m]"], table["Northing [m]"])
    return table


@pytest.mark.slow
def test_the_script_makes_the_committed_files_byte_for_byte(tmp_path):
    # In a process of its own, as a person runs it: the ODS library counts namespaces over the life of a process.
    command = [sys.executable, "-m", "demo_samples.kestrel_bight.make_demo", "--into", tmp_path]
    subprocess.run(command, check=True, cwd=DEMO.parents[1], capture_output=True)
    made = sorted(tmp_path.iterdir())
    assert len(made) == 12
    for path in made:
        committed = DEMO / path.name
        if path.suffix == ".png":  # text rendering may differ in a few pixels between font libraries
            with Image.open(path) as new, Image.open(committed) as old:
                pixels = [np.asarray(image.convert("RGB"), dtype=float) for image in (new, old)]
            assert np.abs(pixels[0] - pixels[1]).mean() < 2.0
        else:
            assert path.read_bytes() == committed.read_bytes(), path.name


def test_the_folder_stays_small():
    sizes = [p.stat().st_size for p in DEMO.rglob("*") if p.is_file() and not {"out", "__pycache__"} & set(p.parts)]
    assert sum(sizes) < 4_000_000
    assert (DEMO / "kestrel_bight.png").stat().st_size < 150_000


def test_truth_sums_to_one_is_missing_on_land_and_does_not_depend_on_the_company(grid):
    longitude, latitude = grid["longitude"].values.ravel(), grid["latitude"].values.ravel()
    fractions = true_fractions(longitude, latitude)
    land = is_land(longitude, latitude)
    assert np.array_equal(np.isnan(fractions[:, 0]), land)
    wet = fractions[~land]
    np.testing.assert_allclose(wet.sum(axis=1), 1.0, rtol=0.0, atol=1e-12)
    assert wet.min() >= 0.0
    assert wet[:, 0].min() < 0.01
    assert 0.90 < wet[:, 0].max() <= 0.965
    assert 0.30 < np.mean(wet[:, 2] == 0.0) < 0.50
    one = np.flatnonzero(~land)[4321]
    alone = true_fractions([longitude[one]], [latitude[one]])[0]
    np.testing.assert_allclose(alone, fractions[one], rtol=1e-12, atol=1e-15)


def test_truth_file_holds_cell_means_near_the_centre_values(grid):
    with xr.open_dataset(DEMO / "truth.nc") as truth:
        means = np.stack([truth[part].values for part in ("mud", "sand", "gravel")], axis=-1)
        rock = truth["bare_rock"].values
    sea = grid["sea"].values == 1
    assert np.array_equal(np.isfinite(means[..., 0]), sea)
    np.testing.assert_allclose(means[sea].sum(axis=1), 1.0, rtol=0.0, atol=2e-7)  # three float32 roundings
    # Cells without shore or rock, integrated finely between their corners in longitude and latitude.
    rng = np.random.default_rng(3)
    row, column = rng.integers(0, 55, 40), rng.integers(60, 120, 40)
    inside = (np.arange(16) + 0.5) / 16
    v, u = (w.ravel() for w in np.meshgrid(inside, inside, indexing="ij"))
    weights = np.stack([(1 - u) * (1 - v), u * (1 - v), u * v, (1 - u) * v])
    longitude = grid["longitude_vertices"].values[row, column] @ weights
    latitude = grid["latitude_vertices"].values[row, column] @ weights
    fine = true_fractions(longitude, latitude).reshape(40, -1, 3).mean(axis=1)
    # Nine points a cell against 256: the patchiness (1.2 km) is well resolved in cells of 0.5 km.
    np.testing.assert_allclose(means[row, column], fine, rtol=0.0, atol=0.01)
    at_centre = bare_rock(grid["longitude"].values[sea], grid["latitude"].values[sea])
    assert np.all(rock[sea][at_centre] > 0.0)
    assert 0.005 < rock[sea].mean() < 0.03


def test_random_field_has_the_covariance_it_names():
    # Matérn 3/2 (e.g. Rasmussen and Williams 2006, eq. 4.17): (1 + x) exp(-x), 0.05 at x = 4.7439.
    field = RandomField(seed=5, range_km=8.0, waves=4096)
    rng = np.random.default_rng(6)
    x, y = rng.uniform(-5000.0, 5000.0, (2, 3000))
    here = field(x, y)
    assert here.std() == pytest.approx(1.0, abs=0.05)
    for away_km, expected in ((8.0, 0.05), (4.0, 3.37195 * np.exp(-2.37195))):
        angle = rng.uniform(0.0, 2.0 * np.pi, x.size)
        there = field(x + away_km * np.cos(angle), y + away_km * np.sin(angle))
        assert np.mean(here * there) == pytest.approx(expected, abs=0.05)


def test_cf_conventions_tell_the_grid_s_coordinates_mask_and_depth(grid):
    assert grid.cf["longitude"].name == "longitude"
    assert grid.cf["latitude"].name == "latitude"
    assert grid.cf["sea_binary_mask"].name == "sea"
    assert grid.cf["sea_floor_depth_below_mean_sea_level"].attrs["positive"] == "down"
    assert grid.cf.get_bounds("longitude").dims == ("row", "column", "vertex")
    assert dict(grid.sizes) == {"row": 90, "column": 120, "vertex": 4}


def test_cells_are_anticlockwise_hold_their_centres_and_share_corners(grid):
    x, y = grid["longitude_vertices"].values, grid["latitude_vertices"].values
    area = 0.5 * np.sum(x * np.roll(y, -1, axis=-1) - y * np.roll(x, -1, axis=-1), axis=-1)
    assert np.all(area > 0.0)
    cells = shapely.polygons(np.stack([x, y], axis=-1).reshape(-1, 4, 2))
    assert np.all(shapely.contains_xy(cells, grid["longitude"].values.ravel(), grid["latitude"].values.ravel()))
    for corners in (x, y):
        assert np.array_equal(corners[:, :-1, 1], corners[:, 1:, 0])
        assert np.array_equal(corners[:-1, :, 3], corners[1:, :, 0])


def test_sea_mask_agrees_with_coast_and_depth_and_opens_where_it_should(grid):
    sea = grid["sea"].values == 1
    longitude, latitude = grid["longitude"].values, grid["latitude"].values
    coast = gpd.read_file(DEMO / "coast.geojson")
    assert list(coast["name"]) == ["mainland", "island"]
    dry = shapely.contains_xy(coast.union_all(), longitude, latitude)
    assert np.array_equal(dry, ~sea)
    assert np.array_equal(np.isfinite(grid["depth"].values), sea)
    assert sea[0].all()  # the south is open sea
    assert sea[:60, [0, -1]].all()  # so are the offshore parts of the sides
    river = np.flatnonzero(sea[-1])
    assert 1 <= river.size <= 3  # the river is all that reaches the north edge
    assert np.all(sea[-8:].sum(axis=1) <= 4)  # and it is a channel some cells long


def test_depth_raster_holds_the_true_depth():
    with rasterio.open(DEMO / "depth.tif") as raster:
        assert raster.crs.to_epsg() == 32626
        assert raster.res == (500.0, 500.0)
        depth = raster.read(1, masked=True)
        west, south, east, north = raster.bounds
    rows, columns = depth.shape
    easting, northing = np.meshgrid(
        west + (np.arange(columns) + 0.5) * (east - west) / columns,
        north - (np.arange(rows) + 0.5) * (north - south) / rows,
    )
    transformer = Transformer.from_crs("EPSG:32626", "EPSG:4326", always_xy=True)
    expected = depth_m(*transformer.transform(easting, northing)).reshape(depth.shape)
    np.testing.assert_allclose(depth.filled(np.nan), expected, rtol=0.0, atol=0.006)


def test_fractions_of_2004_lie_near_the_truth(survey_2004):
    mud = survey_2004["Mud <63 µm"].to_numpy()
    true = true_fractions(survey_2004["x"], survey_2004["y"])
    first = ~survey_2004["Sample"].duplicated().to_numpy()  # repeats were grabbed some tens of metres away
    difference = (logit(mud.clip(0.002, 0.998)) - logit(true[:, 0]))[first]
    assert np.abs(difference).max() < 0.5
    assert difference.mean() == pytest.approx(0.0, abs=0.03)
    assert difference.std() == pytest.approx(0.10, abs=0.02)
    whole = survey_2004["Sand 63 µm-2 mm"].notna().to_numpy()
    parts = survey_2004.loc[whole, ["Mud <63 µm", "Sand 63 µm-2 mm", "Gravel >2 mm"]].to_numpy()
    np.testing.assert_allclose(parts.sum(axis=1), 1.0, rtol=0.0, atol=1e-9)
    assert np.abs(parts - true[whole]).max() < 0.12
    assert np.all(parts[true[whole, 2] == 0.0, 2] == 0.0)


def test_2004_has_thirty_rows_of_mud_only_and_one_station_three_times(survey_2004):
    assert len(survey_2004) == 180
    assert survey_2004["Sand 63 µm-2 mm"].isna().sum() == 30
    counts = survey_2004["Sample"].value_counts()
    assert list(counts[counts > 1]) == [3]
    same = survey_2004[survey_2004["Sample"] == counts.index[0]]
    assert same["Easting [m]"].nunique() == 1


def test_1987_positions_and_troubles_are_where_the_key_says(answers):
    sheet = openpyxl.load_workbook(DEMO / "survey_1987.xlsx")["Stations"]
    key = answers[answers["file"] == "survey_1987.xlsx"]
    for answer in key.itertuples():
        row = [cell.value for cell in sheet[answer.row]]
        assert row[0] == answer.id
        for text, degrees in ((row[2], answer.latitude), (row[3], answer.longitude)):
            whole, minutes, letter = text.split()
            sign = -1.0 if letter in "SW" else 1.0
            assert sign * (int(whole) + float(minutes) / 60.0) == pytest.approx(degrees, abs=1e-6)
        numbers = [v / 100.0 if isinstance(v, int | float) else np.nan for v in row[5:8]]
        np.testing.assert_allclose(numbers, [answer.mud, answer.sand, answer.gravel], atol=1e-6)
    words = {cell.value for row in sheet.iter_rows(min_row=7, min_col=6, max_col=8) for cell in row}
    assert {"trace", "<1", None} <= words
    assert list(key.loc[key["what"] == "bad_sum", ["mud", "sand", "gravel"]].sum(axis=1)) == pytest.approx([1.37])
    ashore = key[key["what"] == "on_land"]
    assert len(ashore) == 1
    assert is_land(ashore["longitude"], ashore["latitude"]).all()
    others = key[key["what"] != "on_land"]
    assert not is_land(others["longitude"], others["latitude"]).any()
    rock = key[key["what"] == "hard_ground"]
    assert len(rock) >= 3
    assert bare_rock(rock["longitude"], rock["latitude"]).all()


def test_2016_weights_join_the_positions_and_agree_with_the_truth():
    book = python_calamine.CalamineWorkbook.from_path(DEMO / "lab_2016.xlsx")
    positions = {row[0]: (row[3], row[2]) for row in book.get_sheet_by_name("Positions").to_python()[1:]}
    weights = book.get_sheet_by_name("Weights").to_python()[3:]
    names = [row[0] for row in weights]
    assert len(set(names)) == len(names) == 122
    assert set(names) < set(positions)
    assert len(positions) == 123
    grams = np.array([row[1:16] for row in weights], dtype=float)
    np.testing.assert_allclose(grams.sum(axis=1), [row[16] for row in weights], rtol=0.0, atol=5e-4)
    parts = np.stack([grams[:, 9:].sum(axis=1), grams[:, 4:9].sum(axis=1), grams[:, :4].sum(axis=1)], axis=1)
    parts /= parts.sum(axis=1, keepdims=True)
    true = true_fractions(*zip(*(positions[name] for name in names), strict=True))
    assert np.abs(parts - true).max() < 0.12
    difference = logit(parts[:, 0]) - logit(true[:, 0])
    assert difference.std() == pytest.approx(0.10, abs=0.03)


def test_1962_words_fit_the_bed_they_name(answers):
    rows = python_calamine.CalamineWorkbook.from_path(DEMO / "notes_1962.ods").get_sheet_by_index(0).to_python()
    assert rows[1] == ["No.", "Latitude", "Longitude", "Bottom"]
    key = answers[answers["file"] == "notes_1962.ods"].set_index("row")
    words = {row: rows[row - 1][3] for row in key.index}
    assert len(words) == 60
    assert {"rock", "stiff clay", "muddy sand", "shelly gravel"} <= set(words.values())
    mud = key["true_mud"].groupby(pd.Series(words)).mean()
    assert mud["soft mud"] > mud["sandy mud"] > mud["muddy sand"] > mud["clean sand"]
    substrate = key[key["what"] == "substrate"]
    assert {words[row] for row in substrate.index} == {"stiff clay"}


def test_recipe_names_headings_that_the_files_have():
    recipe = tomllib.loads((DEMO / "recipe.toml").read_text(encoding="utf-8"))
    first, second, *_ = recipe["samples"]
    assert [block["file"] for block in recipe["samples"]] == [
        "survey_1987.xlsx", "survey_2004.csv", "lab_2016.xlsx", "notes_1962.ods",
    ]  # fmt: skip
    rows = (
        python_calamine.CalamineWorkbook.from_path(DEMO / first["file"]).get_sheet_by_name(first["sheet"]).to_python()
    )
    top, filled = "", []
    for above, below in zip(rows[3], rows[4], strict=True):
        top = above or top  # a merged heading serves the columns to its right
        filled.append(f"{top} {below}".strip())
    assert set(first["columns"].values()) == set(filled)
    with (DEMO / second["file"]).open(encoding="cp1252", newline="") as file:
        assert set(second["columns"].values()) == set(next(csv.reader(file, delimiter=";")))
    shares: dict[str, float] = {}
    for bed_class in recipe["bed"]["classes"]:
        shares[bed_class["part"]] = shares.get(bed_class["part"], 0.0) + bed_class["share"]
    assert shares == {"mud": 1.0, "sand": 1.0, "gravel": 1.0}
    assert set(recipe["rim"]["classes"]) <= {bed_class["name"] for bed_class in recipe["bed"]["classes"]}
    for name in (recipe["target"]["file"], recipe["target"]["land"], recipe["outputs"]["names"]):
        assert (DEMO / name).is_file()
