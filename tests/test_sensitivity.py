"""Sensitivity sets: designs, limits told before the work, and cases that are the same bytes alone."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from typer.testing import CliRunner

from texture import build
from texture.bed import check_bed
from texture.case_maps import shifted
from texture.cases import make_cases
from texture.errors import RecipeError, TextureError
from texture.mapping import make_mapper
from texture.output import bed_arrays, open_bed
from texture.pipeline import cases, list_cases
from texture.recipe.file import read_recipe
from texture_cli.main import app

PLAIN = {"composition": {"zeros": "replace", "detection_limit": 1e-4}, "validation": {"folds": "random", "compare": []}}
MUDDY = {"what": "shift", "values": [-1.0, 1.0]}
CLASSES = [
    {"name": "fine", "part": "mud", "share": 0.5, "grain": {"diameter_m": 1e-5}, "water_column": {"settling_velocity_m_s": 1e-4}},
    {"name": "silt", "part": "mud", "share": 0.5, "grain": {"diameter_m": 4e-5}, "water_column": {"settling_velocity_m_s": 1e-3}},
    {"name": "sand", "part": "sand", "grain": {"diameter_m": 3e-4}},
    {"name": "gravel", "part": "gravel", "grain": {"diameter_m": 8e-3}},
]  # fmt: skip


def designed(small, **block):
    members = {"members": 3}
    return make_cases(
        read_recipe(small, settings={"sensitivity": block, "ensemble": members, "bed": {"classes": CLASSES}})
    )


def test_one_at_a_time_and_all(small):
    vary = [{"what": "thickness", "factors": [0.5, 2.0]}, MUDDY]
    found, left_out = designed(small, design="one_at_a_time", vary=vary)
    assert [c.name for c in found] == ["as in the recipe", "thickness × 0.5", "thickness × 2", "shift -1", "shift 1"]
    assert left_out == 0
    found, _ = designed(small, design="all", vary=vary)
    assert [c.name for c in found] == [f"thickness × {t}, shift {s}" for t in ("0.5", "2") for s in ("-1", "1")]


@pytest.mark.parametrize("design", ["latin_hypercube", "sobol"])
def test_samples_are_even_in_log_space_and_the_same_again(small, design):
    vary = [
        {"what": "settling_velocity", "classes": ["fine"], "factors": [0.1, 10.0]},
        {"what": "shift", "range": [-2.0, 2.0]},
        {"what": "porosity", "values": [0.3, 0.5]},
    ]
    found, left_out = designed(small, design=design, cases=64, vary=vary)
    assert len(found) == 64
    factor, shift, porosity = (np.array([c.settings[v] for c in found]) for v in found[0].settings)
    # fine × 10 settles as fast as silt: hardly a sample is that near the end. Log-even: a third of all in each third.
    assert left_out <= 2
    counts = np.histogram(np.log10(factor), [-1.0, -1 / 3, 1 / 3, 1.0])[0]
    assert counts.min() >= 20
    assert np.histogram(shift, 4)[0].min() >= 14
    assert abs((porosity == 0.3).sum() - 32) <= 2
    again, _ = designed(small, design=design, cases=64, vary=vary)
    assert [c.name for c in again] == [c.name for c in found]


def test_order_is_kept_in_samples_and_combinations(small):
    vary = [
        {"what": "settling_velocity", "classes": ["fine"], "factors": [0.1, 30.0]},
        {"what": "settling_velocity", "classes": ["silt"], "factors": [0.1, 1.0]},
    ]
    found, left_out = designed(small, design="sobol", cases=32, vary=vary)
    assert left_out > 3
    for case in found:
        fine, silt = (c.water_column.settling_velocity_m_s for c in case.made_by.bed.classes[:2])
        assert fine < silt
    found, left_out = designed(small, design="all", vary=vary)
    assert (len(found), left_out) == (2, 2)  # fine mud × 30 settles faster than either silt
    assert all(c.made_by.bed.classes[0].water_column.settling_velocity_m_s < c.made_by.bed.classes[1].water_column.settling_velocity_m_s for c in found)  # fmt: skip
    with pytest.raises(RecipeError, match=r'"fine" \(0.003 m/s\) no longer settles slower than "silt"'):
        designed(small, design="one_at_a_time", vary=vary)


@pytest.mark.parametrize(
    ("block", "words"),
    [
        ({"vary": [{"what": "thickness", "factors": [-2.0]}]}, r"factors\[0\] = -2.0: expected greater than 0"),
        ({"design": "all", "vary": [{"what": "thickness", "factors": [1 + i / 100 for i in range(100)]},
                                    {"what": "porosity", "factors": [1 + i / 1000 for i in range(100)]}]},
         r"makes 10,000 cases, more than at_most = 500; set sensitivity.at_most = 10000 to say yes"),
        ({"vary": [{"what": "member", "values": [2, 4]}]}, r"member 4 is beyond ensemble.members = 3"),
        ({"vary": [{"what": "member", "values": [1.5]}]}, r"member: 1.5, expected whole numbers from 1"),
        ({"vary": [{"what": "control", "values": ["nearst"]}]}, r'control: "nearst"; did you mean "nearest"\?'),
        ({"vary": [{"what": "thicknes", "factors": [2.0]}]}, r"what = 'thicknes': expected"),
        ({"vary": [{"what": "thickness", "factors": [2.0], "values": [1.0]}]}, r"give one of factors, values and range"),
        ({"vary": [{"what": "thickness", "factors": [2.0]}] * 2}, r"vary: thickness is given twice"),
        ({"vary": [{"what": "covariance_range", "values": [5000.0]}]}, r"every coordinate has its own; give factors"),
        ({"design": "sobol", "vary": [MUDDY]}, r'design = "sobol" needs their number'),
        ({"design": "all", "vary": [MUDDY, {"what": "member", "values": [1]}]}, r"shift and member each choose the map"),
        ({"vary": [{"what": "detection_limit", "values": [0.5]}]}, r"a detection limit of 0.5 would replace every part"),
        ({"vary": [{"what": "rim_width", "values": [40]}]}, r"rim_width 40: .*covers all water"),
    ],
)  # fmt: skip
def test_impossible_settings_are_one_line_before_the_work(small, block, words):
    (small.parent / "grabs.csv").write_text("not looked at\n")  # so that any work would fail another way
    with pytest.raises(TextureError, match=words) as error:
        list_cases(small, sensitivity=block, ensemble={"members": 3})
    assert "\n" not in str(error.value)


def test_a_control_cannot_be_shifted_by_a_method_without_variance(small):
    with pytest.raises(RecipeError, match=r'shift needs kriging; method.name = "nearest" is none'):
        list_cases(small, sensitivity={"vary": [MUDDY]}, method={"name": "nearest"})
    with pytest.raises(RecipeError, match=r"the recipe has no \[sensitivity\]"):
        list_cases(small)


VARY = [
    {"what": "thickness", "factors": [0.5, 2.0]},
    MUDDY,
    {"what": "member", "values": [2]},
    {"what": "control", "values": ["uniform", "nearest"]},
    {"what": "detection_limit", "factors": [2.0]},
    {"what": "covariance_range", "factors": [0.5]},
    {"what": "porosity", "factors": [1.1]},
    {"what": "rim_width", "values": [1]},
]
SET = {"sensitivity": {"vary": VARY}, "ensemble": {"members": 3}}


@pytest.fixture(scope="module")
def made(small_in, tmp_path_factory):
    recipe = small_in(tmp_path_factory.mktemp("cases"))
    return cases(recipe, output=recipe.parent / "out", **SET, **PLAIN)


@pytest.mark.slow
def test_each_case_is_ready_and_says_its_settings(made):
    out = made.found.recipe.output
    table = pd.read_csv(out / "cases.csv")
    assert len(table) == 12
    for _, row in table.iterrows():
        path = out / row["file"]
        checks = check_bed(bed_arrays(open_bed(path)), erosion_depth_m=0.05)
        assert not [c for c in checks if c.verdict == "fail"]
        with xr.open_dataset(path) as bed:
            assert bed.attrs["case"] == row["case"]
            assert bed.attrs["case_settings"] == row["settings"]
    assert (out / "cases.png").read_bytes()[:4] == b"\x89PNG"


@pytest.mark.slow
def test_cases_differ_in_what_they_say(made):
    table = pd.read_csv(made.found.recipe.output / "cases.csv").set_index("settings")
    total = table[["mud_tonnes", "sand_tonnes", "gravel_tonnes"]].sum(axis=1)
    base = total["as in the recipe"]
    assert total["thickness × 0.5"] == pytest.approx(base / 2, rel=1e-6)
    assert total["porosity × 1.1"] < base
    mud = table["mud_tonnes"]
    assert mud["shift -1"] < mud["as in the recipe"] < mud["shift 1"]
    assert table["mud_tonnes"].nunique() == len(table)

    def surface(name: str) -> np.ndarray:
        with xr.open_dataset(made.found.recipe.output / table.loc[name, "file"]) as bed:
            return bed["class_fraction"].isel(layer=0).to_numpy()[:, bed["rim_weight"].to_numpy() == 0.0]

    assert np.ptp(surface("control uniform"), axis=1).max() < 1e-12
    assert "not a member" in xr.open_dataset(made.found.recipe.output / table.loc["shift 1", "file"]).attrs["case_note"]


@pytest.mark.slow
def test_a_case_alone_is_the_same_bytes_and_the_first_is_the_build(made):
    recipe = made.found.recipe.output.parent / "recipe.toml"
    alone = cases(recipe, output=recipe.parent / "alone", only=[5, 6, 9], **SET, **PLAIN)
    assert [p.relative_to(recipe.parent / "alone").as_posix() for p in alone.files] == [
        f"cases/{n}/bed.nc" for n in ("05", "06", "09")
    ]
    for path in alone.files:
        other = made.found.recipe.output / path.relative_to(recipe.parent / "alone")
        assert path.read_bytes() == other.read_bytes()
    whole = build(recipe, output=recipe.parent / "whole", ensemble={"members": 3, "files": "each"}, **PLAIN)
    with xr.open_dataset(made.found.recipe.output / "cases" / "01" / "bed.nc") as first:
        np.testing.assert_array_equal(first["class_fraction"].to_numpy().reshape(3, 1, -1), whole.bed.class_fraction)
    with (
        xr.open_dataset(made.found.recipe.output / "cases" / "06" / "bed.nc") as case,
        xr.open_dataset(recipe.parent / "whole" / "members" / "2" / "bed.nc") as member,
    ):
        np.testing.assert_array_equal(case["class_fraction"].to_numpy(), member["class_fraction"].to_numpy())


@pytest.mark.slow
def test_the_command_lists_makes_and_refuses(small):
    recipe = read_recipe(small)
    text = (
        small.read_text()
        + '\n[sensitivity]\nfiles = "one"\n[[sensitivity.vary]]\nwhat = "thickness"\nfactors = [0.5, 2.0]\n'
    )
    small.write_text(text)
    flags = ["--set", "composition.zeros=replace", "--set", "validation.folds=random", "--set", "validation.compare=[]"]
    runner = CliRunner()
    listed = runner.invoke(app, ["cases", str(small), "--list", "--json", "--quiet", *flags])
    assert json.loads(listed.stdout)["settings"]["3"] == "thickness × 2"
    assert not recipe.output.exists()
    beyond = runner.invoke(app, ["cases", str(small), "--only", "4", *flags])
    assert beyond.exit_code == 2
    assert "case 4: there are 3 cases" in beyond.output
    done = runner.invoke(app, ["cases", str(small), "--quiet", "--json", *flags])
    assert json.loads(done.stdout)["made"] == [1, 2, 3]
    with xr.open_dataset(recipe.output / "cases.nc") as file:
        thickness = file["erodible_thickness"].max(["layer", "y", "x"]).to_numpy()
        assert thickness == pytest.approx([0.1, 0.05, 0.2])
        assert file["class_fraction"].sizes["realization"] == 3


@pytest.mark.slow
def test_a_shift_is_one_standard_deviation_of_the_first_coordinate(made):
    mapper = made.found.mapper
    mean, variance = mapper.predict(made.found.some_centres(50))
    moved = shifted(mapper, mean, variance, np.ones(50), 1.5)
    spread = np.sqrt(variance - np.minimum(variance, mapper.small_scale))
    # By hand: the tree's mud share hangs on the first coordinate alone; the second follows by the correlation.
    np.testing.assert_allclose(moved[:, 0] - mean[:, 0], 1.5 * spread[:, 0], rtol=1e-6)
    np.testing.assert_allclose(
        moved[:, 1] - mean[:, 1], 1.5 * spread[:, 1] * mapper.correlation[0, 1], rtol=1e-6, atol=1e-9
    )
    control = make_mapper("nearest", made.found.validation.plain, made.found.recipe.method)
    assert not control.integrates


def test_the_plan_of_a_build_says_what_cases_there_would_be(small):
    from texture.planning import plan

    found = plan(small, sensitivity={"vary": [MUDDY]}, ensemble={"members": 3})
    assert found.summary()["cases"]["cases"] == 3
    assert found.seconds["members"] > 0.0
    assert any("3, each at most" in line for line in found.summary_lines())
