"""Results and positions on two sheets, or in two files."""

import numpy as np
import pytest

from tests.stations.samples import ROWS, as_csv, recipe_for, write_xlsx
from texture.errors import SampleError
from texture.stations import read_samples

PLACES = [["Sample", "Latitude", "Longitude", "Depth (m)", "Remarks"], *[[r[0], r[1], r[2], 10.0, ""] for r in ROWS]]
RESULTS = [
    ["Lab no.", "Sample", "Mud %", "Sand %", "Gravel %"],
    *[[i, r[0], *r[3:6]] for i, r in enumerate(reversed(ROWS))],
]


@pytest.fixture
def book(tmp_path):
    def write(places=PLACES, results=RESULTS, **block):
        path = tmp_path / "lab.xlsx"
        write_xlsx(path, {"Cover": [["Report", "of a laboratory"]], "Positions": places, "Results": results})
        return read_samples(recipe_for({"file": path, **block}))

    return write


def test_two_sheets_are_joined_on_their_id(book):
    stations = book()
    assert stations.table["sheet"].unique().tolist() == ["Results"]
    table = stations.table.set_index("id").loc[[r[0] for r in ROWS]]
    assert table["latitude"].tolist() == [r[1] for r in ROWS]
    np.testing.assert_allclose(table["mud"], [r[3] / 100 for r in ROWS])
    assert table["depth_m"].tolist() == [10.0] * 6
    assert stations.counts["rows_read"] == 7  # position rows are counted apart
    assert any(
        'positions from lab.xlsx, sheet "Positions" by "Sample" = "Sample"; 6 position rows' in n
        for n in stations.notes
    )


def test_several_results_of_one_place_and_results_without_a_place(book):
    extra = [
        [7, " a1", 32.5, 60.0, 7.5],
        [8, "B9", 10.0, 90.0, 0.0],
        ["", "", "", "", ""],
        ["Checked twice", "", "", "", ""],
    ]
    stations = book(results=RESULTS + extra)
    assert (stations.counts["rows_merged"], stations.counts["rows_not_samples"]) == (1, 2)
    assert stations.set_aside["reason"].tolist() == ['id "B9" has no position in lab.xlsx, sheet "Positions"']


def test_hard_ground_among_the_positions_is_evidence(book):
    stations = book(
        places=[*PLACES, ["A7", 54.2, 3.3, 12.0, "no recovery, rock"], ["A8", 54.2, 3.4, 12.0, "not analysed"]]
    )
    assert stations.hard_ground[["id", "sheet", "row"]].values.tolist() == [["A7", "Positions", 8]]
    assert stations.accounts.set_index("sheet").loc["Positions", ["rows_read", "evidence"]].tolist() == [1, 1]


def test_two_files(tmp_path):
    (tmp_path / "places.csv").write_text(as_csv(PLACES))
    (tmp_path / "results.csv").write_text(as_csv(RESULTS))
    block = {"file": tmp_path / "results.csv", "join": {"file": tmp_path / "places.csv", "on": "Sample"}}
    assert read_samples(recipe_for(block)).counts["stations"] == 6


def test_an_id_with_two_positions(book):
    with pytest.raises(
        SampleError,
        match=r'sheet "Positions", row 8, column "Sample": found "A2", which also stands in row 3 with another position',
    ):
        book(places=[*PLACES, ["A2", 54.9, 3.9, 10.0, ""]])


def test_ids_that_never_meet(book):
    with pytest.raises(
        SampleError,
        match=r'sheet "Results", column "Lab no\.": found 0 and others, none of them in lab\.xlsx, sheet "Positions"',
    ):
        book(places=[PLACES[0], *[["X" + r[0], *r[1:]] for r in PLACES[1:]]])


def test_a_join_that_is_not_there(book):
    with pytest.raises(
        SampleError, match="no table of positions with ids to join in Cover; correct join in the recipe"
    ):
        book(join={"sheet": "Cover"})


def test_ids_that_two_people_punctuated_differently(book):
    stations = book(places=[PLACES[0], *[[r[0].replace("A", "A-"), *r[1:]] for r in PLACES[1:]]])
    assert stations.counts["stations"] == 6
    assert any("the ids meet only without their hyphens" in note for note in stations.notes)
