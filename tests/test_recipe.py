"""The recipe: what is accepted, what is refused, and with which words."""

import tomllib
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.errors import RecipeError
from texture.recipe import Recipe
from texture.recipe.file import read_recipe, resolved_toml

BASE = """
title = "Test"
[[samples]]
file = "a.csv"
[target]
bounds = [0.0, 0.0, 10000.0, 10000.0]
cell_size = 500.0
crs = "EPSG:32633"
"""


@pytest.fixture
def recipe_path(tmp_path: Path) -> Path:
    (tmp_path / "a.csv").write_text("id,mud\n")
    path = tmp_path / "recipe.toml"
    path.write_text(BASE)
    return path


def test_defaults_and_paths_relative_to_the_recipe(recipe_path):
    recipe = read_recipe(recipe_path)
    assert recipe.samples[0].file == (recipe_path.parent / "a.csv").resolve()
    assert recipe.output == (recipe_path.parent / "out").resolve()
    assert recipe.method.name == "kriging"
    assert recipe.rim is None


def test_resolved_recipe_reads_back_the_same(recipe_path):
    recipe = read_recipe(recipe_path, ["rim={width_cells=3, classes={sand=1.0}}", "samples.0.from=1987-05-01"])
    resolved = recipe_path.parent / "resolved.toml"
    resolved.write_text(resolved_toml(recipe, recipe_path.parent))
    assert read_recipe(resolved) == recipe
    assert str(recipe_path.parent) not in resolved.read_text()


def test_overrides_take_toml_or_plain_words(recipe_path):
    recipe = read_recipe(recipe_path, ["method.neighbours=24", "method.fit=variogram", "samples.0.crs=EPSG:4326"])
    assert (recipe.method.neighbours, recipe.method.fit, recipe.samples[0].crs) == (24, "variogram", "EPSG:4326")


@pytest.mark.parametrize(
    ("override", "words"),
    [
        ("method.nieghbours=3", r'unknown key "method.nieghbours"; did you mean "neighbours"\?'),
        ("methud.name=kriging", r'unknown key "methud"; did you mean "method"\?'),
        ("method.name=krig", "method.name = 'krig': expected 'mean', 'nearest'"),
        ("method.neighbours=2", "method.neighbours = 2: expected greater than or equal to 4"),
        ("bed.layers=[{thickness_m=-1}]", r"bed.layers\[0\].thickness_m = -1: expected greater than 0"),
        ("samples.0.columns={latitud='x'}", r'columns.latitud: unknown role; did you mean "latitude"\?'),
        ("samples.0.file=b.csv", r'samples\[0\].file = "b.csv" does not exist'),
        ("samples.3.file=b.csv", r'"3" is no item of that list of 1'),
        ("title.x=1", '"title" is a single value and has no keys below it'),
        ("nonsense", r'--set "nonsense": expected key.path=value'),
        ("target.bounds=[5.0,0.0,1.0,9.0]", "bounds are west, south, east, north"),
        ("target.points_per_cell=5", "points_per_cell is 1, 4, 9, 16 …; found 5"),
        ("target.file=a.csv", "give either file, or bounds"),
        ("composition.parts=['mud']", r"only \[\"mud\", \"sand\", \"gravel\"\] can be read"),
        ("rim={width_cells=2, classes={sand=0.4}}", "rim's fractions sum to 0.4, expected 1"),
        ("rim={width_cells=2, classes={snad=1.0}}", r'rim.classes: unknown name "snad"; did you mean "sand"\?'),
        ("rim={classes={sand=1.0}}", "give either width_cells or width_m"),
        ("bed.classes=[{name='m',part='mud',share=0.5}]", 'shares of part "mud" sum to 0.5, expected 1'),
        ("bed.classes=[{name='m',part='mud'}]", 'no class takes part "sand"; its mass would be lost'),
        ("bed.layers=[{thickness_m=1.0,fill={sand=1.0}}]", "the first layer is the map"),
        ("bed.layers=[{thickness_m=1},{thickness_m=1,fill={sand=0.5}}]", r"bed.layers\[1\].fill: fractions sum to 0.5"),
    ],
)
def test_each_mistake_has_its_line(recipe_path, override, words):
    with pytest.raises(RecipeError, match=words) as caught:
        read_recipe(recipe_path, [override])
    assert "\n" not in str(caught.value)


def test_an_override_without_value_leaves_the_default(recipe_path):
    assert read_recipe(recipe_path, ["title="]).title == "Untitled bed"
    assert read_recipe(recipe_path, ["target.mask=x", "target.mask="]).target.mask is None


def test_file_of_positions_is_relative_to_the_recipe_too(recipe_path):
    (recipe_path.parent / "b.csv").write_text("id\n")
    recipe = read_recipe(recipe_path, ["samples.0.join.file=b.csv"])
    assert recipe.samples[0].join.file == (recipe_path.parent / "b.csv").resolve()
    with pytest.raises(RecipeError, match=r'samples\[0\].join.file = "c.csv" does not exist'):
        read_recipe(recipe_path, ["samples.0.join.file=c.csv"])


def test_missing_recipe_and_broken_toml(tmp_path):
    with pytest.raises(RecipeError, match=r"none.toml: no such recipe"):
        read_recipe(tmp_path / "none.toml")
    with pytest.raises(RecipeError, match="this is a folder"):
        read_recipe(tmp_path)
    broken = tmp_path / "broken.toml"
    broken.write_text("title = 1\nnonsense\n")
    with pytest.raises(RecipeError, match=r"broken.toml: not valid TOML: .*line 2"):
        read_recipe(broken)


def test_missing_block_is_named(tmp_path):
    path = tmp_path / "recipe.toml"
    path.write_text('title = "x"\n')
    with pytest.raises(RecipeError, match=r'missing key "samples" \(and 1 more problem\)'):
        read_recipe(path)


@given(st.text(alphabet=st.characters(codec="utf-8", exclude_categories=["Cs"]), max_size=30))
def test_any_title_survives_the_round_trip(title):
    recipe = Recipe.model_validate(tomllib.loads(BASE) | {"title": title})
    assert tomllib.loads(resolved_toml(recipe, Path("/")))["title"] == title
