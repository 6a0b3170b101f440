"""A draft: written from files nobody has touched, and good enough to build from."""

import pytest

from texture import build
from texture.drafting import draft
from texture.errors import RecipeError, SampleError

FILES = ("survey_1987.xlsx", "survey_2004.csv", "lab_2016.xlsx", "notes_1962.ods")


@pytest.mark.slow
def test_unedited_draft_of_the_demo_builds_the_same_stations(demo_recipe, tmp_path, plain):
    folder = demo_recipe.parent
    text = draft([folder / f for f in FILES], tmp_path / "recipe.toml", grid=folder / "model_grid.nc")
    assert "# DOUBT: no file says which system these metres are in; EPSG:32626 puts them where the others are" in text
    assert "8,852 of them water" in text
    assert "north: 2 cells, 1.1 km, river inlet, not rimmed" in text
    quick = {"validation": {"count": 2, "compare": []}, "outputs": {"geotiff": False}}
    result = build(tmp_path / "recipe.toml", **quick)
    ours, theirs = (r.found.stations.table.set_index(["survey", "id"]) for r in (result, plain))
    parts = ["mud", "sand", "gravel", "longitude", "latitude"]
    inland = ours.index.difference(theirs.index).union(theirs.index.difference(ours.index))
    assert len(inland) == 0
    # The demo's recipe knows the coast as polygons, the draft by the mask alone: only stations moved off land may differ.
    same = (ours[parts] - theirs.loc[ours.index, parts]).abs().max(axis=1).fillna(0.0) < 1e-9
    assert (~same).sum() <= 2


@pytest.fixture
def table(tmp_path):
    rows = [f"S{i},{-26.5 + 0.01 * i},{44.1 + 0.013 * i},{10 * i},{90 - 10 * i},10" for i in range(8)]
    (tmp_path / "grabs.csv").write_text("id,longitude,latitude,mud,sand,gravel\n" + "\n".join(rows) + "\n")
    return tmp_path / "grabs.csv"


def test_draft_does_not_replace_a_recipe_unasked(table):
    recipe = table.parent / "recipe.toml"
    recipe.write_text("mine")
    with pytest.raises(RecipeError, match="exists already; use --overwrite"):
        draft([table], recipe)
    assert recipe.read_text() == "mine"
    assert draft([table], recipe, overwrite=True) == recipe.read_text()
    assert not [p for p in table.parent.iterdir() if p.name.startswith(".")]


def test_missing_and_unreadable_files_have_their_line(tmp_path):
    with pytest.raises(RecipeError, match=r"none.csv: no such file"):
        draft([tmp_path / "none.csv"], tmp_path / "recipe.toml")
    (tmp_path / "empty.csv").write_text("")
    with pytest.raises(SampleError, match=r"empty.csv"):
        draft([tmp_path / "empty.csv"], tmp_path / "recipe.toml")
    assert not (tmp_path / "recipe.toml").exists()


def test_grid_that_cannot_be_read_is_a_doubt(table):
    (table.parent / "grid.nc").write_text("no grid")
    text = draft([table], table.parent / "new.toml", grid=table.parent / "grid.nc")
    assert "# DOUBT: grid.nc: cannot be read as NetCDF" in text


def test_what_the_grid_can_give_is_proposed_and_can_be_switched_on(table, demo_recipe):
    from texture.recipe.file import read_recipe

    text = draft([table], table.parent / "new.toml", grid=demo_recipe.parent / "model_grid.nc")
    plain = read_recipe(table.parent / "new.toml")
    assert not plain.method.covariates
    begin, end = text.index("# [[method.covariates]]"), text.index("# Places with a bed")
    proposal = text[begin:end].replace("# ", "", 1).replace("\n# ", "\n")
    (table.parent / "new.toml").write_text(text[:begin] + proposal + text[end:])
    recipe = read_recipe(table.parent / "new.toml")
    assert [c.name for c in recipe.method.covariates] == ["depth", "shore_distance"]
    assert recipe.validation.compare[-2:] == ("kriging_with_covariates", "kriging_in_water")


def test_hard_ground_and_cores_are_proposed_where_rows_tell_of_them(table):
    import tomllib

    plain = draft([table], table.parent / "plain.toml")
    assert "hard_ground" not in plain
    assert "cores" not in plain
    head, *rows = table.read_text().splitlines()
    more = [f"{row},0,10," for row in rows]
    more += ["R1,-26.4,44.2,,,,,,rock", "S1,-26.49,44.113,20,70,10,10,30,", "S1,-26.49,44.113,20,70,10,30,55,"]
    table.write_text("\n".join([f"{head},top (cm),bottom (cm),remarks", *more]) + "\n")
    text = draft([table], table.parent / "new.toml")
    assert "# 1 row found hard ground" in text
    assert "# 2 intervals of cores lie below the surface, down to 0.55 m" in text
    begin, end = text.index("# [bed]"), text.index("# Places with a bed")
    switched = "\n".join(line.removeprefix("# ") for line in text[begin:end].splitlines() if "lie below" not in line)
    bed = tomllib.loads(text[:begin] + switched)["bed"]
    assert bed["hard_ground_threshold"] == 0.5
    assert bed["layers"] == [{"thickness_m": 0.1}, {"thickness_m": 0.45, "fill": "cores"}]
    begin, end = text.index("# [[zones]]"), text.index("# A coarse rim")
    zones = tomllib.loads("\n".join(line.removeprefix("# ") for line in text[begin:end].splitlines()))["zones"]
    assert [z["name"] for z in zones] == ["channel"]
