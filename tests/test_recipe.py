"""The recipe: what is accepted, what is refused, and with which words."""

import tomllib
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.errors import RecipeError
from texture.recipe import Recipe
from texture.recipe.file import read_recipe, resolved_toml
from texture.recipe.paths import named_files
from texture.recipe.reference import recipe_schema, setting_keys, settings_reference
from texture.recipe.unset import left_to_default

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


@settings(deadline=None)  # what is tested is the words, not the speed of a busy machine
@given(st.text(alphabet=st.characters(codec="utf-8", exclude_categories=["Cs"]), max_size=30))
def test_any_title_survives_the_round_trip(title):
    recipe = Recipe.model_validate(tomllib.loads(BASE) | {"title": title})
    assert tomllib.loads(resolved_toml(recipe, Path("/")))["title"] == title


def test_settings_reference_is_current():
    written = Path(__file__).parents[1] / "docs" / "settings.md"
    fresh = settings_reference()
    assert written.read_text(encoding="utf-8") == fresh, "run: texture recipe --reference > docs/settings.md"


def test_reference_and_schema_name_every_setting_and_what_it_means():
    text = settings_reference()
    for key in setting_keys():
        assert f"| `{key.rsplit('.', 1)[-1]}` |" in text, key
    assert "| |\n" not in text.replace("| | |\n", "").replace("default | |\n", "")  # none without a description
    properties = recipe_schema()["$defs"]["Samples"]["properties"]
    assert properties["from"]["description"] == "first day of the survey"
    assert properties["columns"]["additionalProperties"] is False
    assert "longitude" in properties["columns"]["properties"]


def unknown_keys(schema, node, value, place=""):
    """Keys of a recipe that a reader of the schema would call unknown."""
    while "$ref" in node:
        node = schema["$defs"][node["$ref"].rsplit("/", 1)[-1]]
    if isinstance(value, list):
        return [k for v in value for k in unknown_keys(schema, node.get("items", {}), v, place)]
    if not isinstance(value, dict):
        return []
    if "anyOf" in node:
        return min((unknown_keys(schema, n, value, place) for n in node["anyOf"]), key=len)
    known, found = node.get("properties", {}), []
    for key, inside in value.items():
        if key in known:
            found += unknown_keys(schema, known[key], inside, f"{place}{key}.")
        elif node.get("additionalProperties") is False:
            found.append(f"{place}{key}")
    return found


def test_schema_knows_the_demo_s_recipe_and_no_typing_mistake(demo_recipe):
    schema, given = recipe_schema(), tomllib.loads(demo_recipe.read_text())
    assert unknown_keys(schema, schema, given) == []
    given["method"]["nieghbours"] = 3
    given["samples"][0]["columns"]["lattitude"] = "Lat"
    assert unknown_keys(schema, schema, given) == ["samples.columns.lattitude", "method.nieghbours"]


def test_what_the_recipe_left_out_is_known_after_its_paths_were_found(recipe_path):
    unset = {u.key: u.value for u in left_to_default(read_recipe(recipe_path, ["method.neighbours=20"]))}
    assert unset["rim"] is None
    assert unset["samples.basis"] == "whole"
    assert unset["bed.least_fraction"] == 0.005
    assert not {"title", "samples.file", "target.bounds", "method.neighbours"} & set(unset)
    assert all(u.description for u in left_to_default(read_recipe(recipe_path)))


def test_every_file_that_a_recipe_names_is_listed_once(recipe_path):
    recipe = read_recipe(recipe_path)
    assert named_files(recipe) == [recipe.samples[0].file]
    again = recipe.model_copy(update={"samples": (recipe.samples[0], recipe.samples[0])})
    assert named_files(again) == [recipe.samples[0].file]
