"""Drafted recipes: what was recognised, what is in doubt, and that an unedited draft reads the demo."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from tests.stations.samples import HEADER, ROWS, as_csv, recipe_for, write_xlsx
from texture.errors import SampleError
from texture.recipe.file import read_recipe
from texture.stations import read_samples
from texture.stations.draft import draft_recipe
from texture.stations.plausible import depth_doubts

DEMO = Path(__file__).parents[2] / "demo_samples" / "kestrel_bight"
DEMO_FILES = ["survey_1987.xlsx", "survey_2004.csv", "lab_2016.xlsx", "notes_1962.ods"]
AROUND = (-26.95, 43.95, -26.0, 44.45)  # degrees, the extent of the demo's grid


@pytest.fixture
def files(tmp_path):
    def write(**contents):
        paths = []
        for name, rows in contents.items():
            paths.append(tmp_path / f"{name}.csv")
            paths[-1].write_text(as_csv(rows))
        return paths

    return write


def read(text, folder):
    path = folder / "draft.toml"
    path.write_text(text, encoding="utf-8")
    return read_samples(read_recipe(path))


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    """Stations of the demo's four spreadsheets through an unedited draft, beside the demo's own answers."""
    folder = tmp_path_factory.mktemp("draft")
    text = draft_recipe([DEMO / f for f in DEMO_FILES], folder, DEMO / "model_grid.nc", AROUND)
    return text, read(text, folder), pd.read_csv(DEMO / "answers.csv")


def test_layouts_that_were_found_are_written_down_and_read_back(tmp_path):
    forms = {
        r[0]: [["Sample", r[0]], ["Lat", r[1]], ["Lon", r[2]], ["Mud %", r[3]], ["Sand %", r[4]], ["Gravel %", r[5]]]
        for r in ROWS
    }
    write_xlsx(tmp_path / "forms.xlsx", forms)
    write_xlsx(tmp_path / "across.xlsx", {"Data": [list(c) for c in zip(HEADER, *ROWS, strict=True)]})
    text = draft_recipe([tmp_path / "forms.xlsx", tmp_path / "across.xlsx"], tmp_path)
    assert 'layout = "certificates"' in text
    assert 'sheet = "certificates"' not in text
    assert 'layout = "columns"' in text
    assert read(text, tmp_path).counts["rows_used"] == 6  # the second file holds the same samples
    assert read(text, tmp_path).counts["rows_merged"] == 6


def test_an_unedited_draft_reads_all_four_spreadsheets_of_the_demo(demo):
    text, stations, answers = demo
    assert "NOT READ" not in text
    assert 'crs = "EPSG:32626"' in text
    assert stations.accounts["file"].unique().tolist() == DEMO_FILES
    expected = answers["what"].value_counts()
    kinds = stations.table["kind"].value_counts()
    assert kinds["description"] == expected["words"]
    assert kinds["hard_ground"] == expected["hard_ground"]
    assert kinds["partial"] == expected["mud_only"]
    assert stations.counts["rows_merged"] == expected["repeat"]
    assert stations.counts["rows_set_aside"] == expected[["lost", "substrate", "bad_sum"]].sum()


def test_the_demo_comes_back_as_far_as_its_digits_allow(demo):
    _, stations, answers = demo
    single = stations.table[
        (stations.table["repeats"] == 1) & ~stations.table["kind"].isin(["description", "hard_ground"])
    ]
    both = single.merge(answers, on=["file", "row"], suffixes=("", "_answer"))
    assert len(both) == len(single) > 400
    for axis in ("longitude", "latitude"):
        np.testing.assert_allclose(
            both[axis], both[f"{axis}_answer"], atol=1e-6
        )  # the answers are typed to six decimals
    # limits and traces are typed as such, so the answers of those rows are only what stands for them
    exact = both[both["what"] != "limit"]
    answer = exact[["mud_answer", "sand_answer", "gravel_answer"]].to_numpy()
    typed_sum = answer.sum(axis=1, keepdims=True)  # the answers are as typed: 99.9 or 100.1 % now and then
    answer = np.where(np.isnan(typed_sum), answer, answer / typed_sum)
    found = exact[["mud", "sand", "gravel"]].to_numpy()
    np.testing.assert_allclose(np.where(np.isnan(answer), np.nan, found), answer, atol=1e-6)
    completed = np.isfinite(found) & np.isnan(answer)
    assert set(exact["what"][completed.any(axis=1)]) == {"completed"}
    np.testing.assert_allclose(found[completed.any(axis=1)].sum(axis=1), 1.0, atol=1e-12)


def test_a_draft_says_what_each_column_was_taken_for(files, tmp_path):
    text = draft_recipe(files(survey=[[*HEADER, "Colour"], *[[*r, "grey"] for r in ROWS]]), tmp_path)
    assert 'mud = "Mud (%)"' in text
    assert '# percent, such as "12.5"' in text
    assert "# not used: Colour" in text
    assert read(text, tmp_path).counts["stations"] == 6


def test_a_missing_projection_is_told_by_the_other_files(files, tmp_path):
    import pyproj

    to_metres = pyproj.Transformer.from_crs(4326, 32631, always_xy=True)
    metres = [[r[0], *(round(v, 1) for v in to_metres.transform(r[2], r[1] + 0.01)), *r[3:6]] for r in ROWS]
    head = ["Station", "Easting", "Northing", *HEADER[3:6]]
    alone = files(metres=[head, *metres])
    text = draft_recipe(alone, tmp_path)
    assert "# DOUBT: not read yet: metres.csv" in text
    assert "easting and northing without a coordinate system" in text
    filled = text.replace('# crs = "EPSG:…" ', 'crs = "EPSG:32631" # ').replace(
        '# file = "grid.nc"', 'file = "metres.csv"'
    )
    assert read(filled, tmp_path).counts["rows_used"] == 6
    text = draft_recipe([*files(survey=[HEADER, *ROWS]), *alone], tmp_path)
    assert 'crs = "EPSG:32631"' in text
    assert "# DOUBT: no file says which system these metres are in" in text
    assert read(text, tmp_path).counts["rows_used"] == 12


@pytest.mark.parametrize(
    ("extent", "doubt"),
    [
        ((-3.3, 54.1, -3.2, 54.2), 'longitudes may be west: hemisphere = "W"'),
        ((54.1, 3.2, 54.2, 3.3), "latitude and longitude may be swapped"),
        ((100.0, 10.0, 101.0, 11.0), "miss the grid"),
    ],
)
def test_positions_that_miss_the_grid_are_doubted(files, tmp_path, extent, doubt):
    text = draft_recipe(files(survey=[HEADER, *ROWS]), tmp_path, tmp_path / "grid.nc", extent)
    assert any(doubt in line for line in text.splitlines() if line.startswith("# DOUBT"))


def test_a_file_that_cannot_be_read_becomes_a_comment(files, tmp_path):
    text = draft_recipe(files(survey=[HEADER, *ROWS], letter=[["Dear colleague"], ["see", "below"]]), tmp_path)
    assert "# NOT READ: letter.csv: no table of samples found" in text
    assert read(text, tmp_path).counts["stations"] == 6


def test_a_lone_file_without_a_table_is_shown_for_a_person_to_fill_in(files, tmp_path):
    bare = files(bare=[[r[0], *r[1:6]] for r in ROWS])
    text = draft_recipe(bare, tmp_path)
    assert "# DOUBT: not read yet: bare.csv: no table of samples found" in text
    assert '# row 1: "A1" | "54.101" | "3.201" | "12.5" | "80.0" | "7.5"' in text
    assert '[[samples]]\nfile = "bare.csv"' in text
    with pytest.raises(SampleError, match="empty"):
        draft_recipe(files(empty=[]), tmp_path)


def sea(longitude, latitude):
    """A sea of a tenth of a degree around the stations, 20 to 40 m deep, rough enough to know one place from another."""
    x, y = 100.0 * (longitude - 3.2), 100.0 * (latitude - 54.1)
    on = (x > -2) & (x < 8) & (y > -2) & (y < 8)
    return np.where(on, 30.0 + 6.0 * np.sin(1.7 * x) + 4.0 * np.cos(2.3 * y), np.nan)


def depths(n=24):
    rng = np.random.default_rng(7)
    lon, lat = 3.2 + 0.06 * rng.random(n), 54.1 + 0.06 * rng.random(n)
    return lon, lat, sea(lon, lat) + rng.normal(0, 0.5, n), np.arange(2, n + 2)


def test_depths_that_agree_say_so():
    lines = depth_doubts(*depths(), sea)
    assert len(lines) == 1
    assert lines[0].startswith("reported depths agree with the grid's: median difference 0.")
    assert lines[0].endswith("over 24 rows")


@pytest.mark.parametrize(
    ("mistake", "cure", "metres"),
    [
        (lambda x, y: (y, x), "latitude and longitude may be swapped", False),
        (lambda x, y: (-x, y), 'hemisphere = "W"', False),
        (lambda x, y: (-x, -y), 'hemisphere = "SW"', False),
        (lambda x, y: (3 + (x - 3) * 0.6, 54 + (y - 54) * 0.6), 'degrees = "minutes"', False),
        (lambda x, y: (x - 6.0, y), "one zone further east", True),
    ],
)
def test_depths_find_the_mistake_in_positions(mistake, cure, metres):
    lon, lat, depth, rows = depths()
    lines = depth_doubts(*mistake(lon, lat), depth, rows, sea, metres)
    assert len(lines) == 1
    assert "reported depths do not agree with the grid's (no row on water)" in lines[0]
    assert cure in lines[0]


def test_depths_find_single_rows_and_other_units():
    lon, lat, depth, rows = depths()
    lon[5], (lon[9], lat[9]) = -lon[5], (lat[9], lon[9])
    lines = depth_doubts(lon, lat, depth, rows, sea)
    assert any("rows 7 disagree" in line and 'hemisphere = "W"' in line for line in lines)
    assert any("rows 11 disagree" in line and "swapped" in line for line in lines)
    lon, lat, depth, rows = depths()
    assert "check positions, crs and the unit of depth" in depth_doubts(lon, lat, depth / 1.8288, rows, sea)[0]
    assert depth_doubts(lon[:7], lat[:7], depth[:7], rows[:7], sea) == []


def test_degrees_and_minutes_typed_as_decimals_are_read_when_the_recipe_says_so(request):
    read_table = request.getfixturevalue("read")  # the name is taken by this file's own reader of drafts
    rows = [[r[0], 54 + (r[1] - 54) * 0.6, *r[2:]] for r in ROWS]
    for row in rows:
        row[2] = 3 + (row[2] - 3) * 0.6
    stations = read_table([HEADER, *rows, ["A7", 54.7, 3.2, 10, 90, 0, ""]], block={"degrees": "minutes"})
    table = stations.table
    assert stations.set_aside["reason"].tolist() == [
        'latitude 54.7: minutes of 60 or more, and the recipe says degrees = "minutes"'
    ]
    np.testing.assert_allclose(table["latitude"], [r[1] for r in ROWS], atol=1e-9)
    np.testing.assert_allclose(table["longitude"], [r[2] for r in ROWS], atol=1e-9)


def test_a_workbook_with_a_sheet_for_each_year(tmp_path):
    path = tmp_path / "years.xlsx"
    later = [[r[0], r[1] + 0.5, *r[2:]] for r in ROWS]
    write_xlsx(path, {"1987": [HEADER, *ROWS], "2004": [HEADER, *later], "Notes": [["nothing", "here"]]})
    with pytest.raises(SampleError, match='samples on 2 sheets, "1987", "2004"; give each a samples block of its own'):
        read_samples(recipe_for({"file": path}))
    assert read(draft_recipe([path], tmp_path), tmp_path).counts["stations"] == 12


def test_minutes_typed_as_decimals_are_doubted(files, tmp_path):
    def rows(step):
        return [
            [f"S{i}", 54 + (i % 3) + (i * step % 60) / 100, 3 + (i % 2) + (i * 7 % 60) / 100, 10, 90, 0, ""]
            for i in range(40)
        ]

    text = draft_recipe(files(minutes=[HEADER, *rows(7)]), tmp_path)
    assert "degrees and minutes typed as decimals" in text
    decimal = [[*r[:1], r[1] + 0.35, *r[2:]] for r in rows(7)]
    assert "typed as decimals" not in draft_recipe(files(decimal=[HEADER, *decimal]), tmp_path)


def test_a_unit_that_only_the_values_tell_is_doubted(files, tmp_path):
    rows = [[*r[:3], r[3]] for r in ROWS]
    text = draft_recipe(files(mud=[["Station", "Latitude", "Longitude", "Mud"], *rows]), tmp_path)
    assert (
        "# DOUBT: mud.csv: no heading and no complete row tells the unit; the largest share, 60, reads as percent"
        in text
    )


def test_doubts_of_reading_stand_once_and_as_doubts(files, tmp_path):
    head = ["Station", "Latitude", "Longitude", "Fines <75 µm (%)", "Sand (%)", "Gravel (%)", "Date"]
    rows = [[*r[:6], "05/06/1987"] for r in ROWS]
    text = draft_recipe(files(old=[head, *rows]), tmp_path)
    assert text.count("its mud ends at 0.075 mm") == 1
    assert "# DOUBT: old.csv: its mud ends at 0.075 mm, not at 0.063 mm; it is mapped with the others as it is" in text
    assert any(line.startswith("# DOUBT") and "order of day and month" in line for line in text.splitlines())
