"""Drafted recipes: what was recognised, what is in doubt, and that an unedited draft reads the demo."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from tests.stations.samples import HEADER, ROWS, as_csv, recipe_for, write_xlsx
from texture.errors import SampleError
from texture.recipe_file import read_recipe
from texture.stations import read_samples
from texture.stations.draft import draft_recipe

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
    with pytest.raises(SampleError, match="easting and northing without a coordinate system"):
        draft_recipe(alone, tmp_path)
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
