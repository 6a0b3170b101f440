"""Members of a whole build: closed, rimmed, the same however they are made, and what they say together."""

from __future__ import annotations

from contextlib import ExitStack

import numpy as np
import pytest
import xarray as xr

from texture import build
from texture.errors import RecipeError
from texture.members import draw_members
from texture.recipe.file import read_recipe
from texture.scratch import Scratch
from texture.structure.averaging import sampling_distance_m

PLAIN = {"composition": {"zeros": "replace", "detection_limit": 1e-4}, "validation": {"folds": "random", "compare": []}}


@pytest.fixture(scope="module")
def built(small_in, tmp_path_factory):
    """Thirty stations on a small raster, sixty members."""
    recipe = small_in(tmp_path_factory.mktemp("ensemble"))
    return build(recipe, output=recipe.parent / "out", ensemble={"members": 60, "above": {"mud": [0.25, 0.5]}}, **PLAIN)


def drawn(found, per_side, numbers, folder, stack):
    apart_m = sampling_distance_m(found.observations.points)
    return draw_members(
        found.target, found.mapper, found.plane, per_side, numbers, found.recipe.seed, folder, stack, apart_m=apart_m
    )


def test_members_are_closed_rimmed_and_in_one_file(built):
    out = built.found.recipe.output
    rim = built.bed.rim_weight.reshape(built.found.target.shape)
    with xr.open_dataset(out / "members.nc") as file, xr.open_dataset(out / "bed.nc") as bed:
        fraction = file["class_fraction"].to_numpy()
        assert fraction.shape == (60, 3, 1, 12, 20)
        np.testing.assert_allclose(fraction.sum(axis=1), 1.0, rtol=0, atol=1e-12)
        sand = list(file["class_name"].values).index("sand")
        assert (fraction[:, sand, :, rim == 1.0] == 1.0).all()
        assert (fraction[:, :, 0, rim == 0.0].std(axis=0) > 1e-3).mean() > 0.95
        small = (fraction > 0.0) & (fraction < built.found.recipe.bed.least_fraction)
        assert not small.any()
        np.testing.assert_array_equal(file["erodible_thickness"].to_numpy(), bed["erodible_thickness"].to_numpy())
        assert file["realization"].attrs["standard_name"] == "realization"
        assert "not itself a possible bed" in file.attrs["comment"]


def test_what_members_say_together_is_what_the_map_says(built):
    members, estimate, wet = built.members, built.estimate, built.found.target.active
    # 60 members: a mean is known to sd / sqrt(60); cells hang together, so that the largest of 240 stays below four of those.
    z = (members.mean - estimate.fractions)[wet] / (members.sd[wet] / np.sqrt(60))
    assert np.abs(z).max() < 4.5
    width, theirs = (q[2, wet] - q[0, wet] for q in (estimate.quantiles, members.quantiles))
    # The 5 and 95 % quantiles of 60 draws are each known to a tenth of the width; averaged over cells that hang together less.
    assert theirs[:, 0].mean() == pytest.approx(width[:, 0].mean(), rel=0.12)
    np.testing.assert_allclose(members.class_probability[:, wet].sum(axis=0), 1.0)
    limits, share = members.above["mud"]
    assert limits == (0.25, 0.5)
    assert (share[0, wet] >= share[1, wet]).all()
    with xr.open_dataset(built.found.recipe.output / "members_summary.nc") as file:
        assert "not itself a possible bed" in file.attrs["comment"]
        np.testing.assert_allclose(file["mud_above_probability"].to_numpy().reshape(2, -1), share)
    assert all(s < 1.0 for s in members.smoother(estimate.fractions, built.found.target.edges))
    assert "equally likely" in (built.found.recipe.output / "report.html").read_text()


def test_a_member_is_the_same_whatever_is_made_beside_it(built, tmp_path, monkeypatch):
    found = built.found
    with ExitStack() as stack:
        (tmp_path / "a").mkdir()
        (tmp_path / "b").mkdir()
        many = drawn(found, built.points_per_side, range(1, 8), tmp_path / "a", stack)
        assert many.method == "circulant embedding"
        monkeypatch.setattr("texture.members.MOST_CELLS", 37)
        alone = drawn(found, built.points_per_side, [5], tmp_path / "b", stack)
        np.testing.assert_array_equal(alone.fractions(5), many.fractions(5))


def test_without_a_raster_members_come_from_frequencies(built, tmp_path, monkeypatch):
    monkeypatch.setattr("texture.members.find_lattice", lambda points, stations: None)
    found, wet = built.found, built.found.target.active
    with ExitStack() as stack:
        maps = drawn(found, built.points_per_side, range(1, 61), tmp_path, stack)
        assert maps.method == "spectral method"
        every = np.stack([maps.fractions(n)[wet] for n in maps.numbers])
    # Standard deviations of two sets of 60 members differ by a tenth (sqrt(1 / 60)); over the cells they average out.
    assert every.std(axis=0).mean(axis=0) == pytest.approx(built.members.sd[wet].mean(axis=0), rel=0.1)


@pytest.mark.slow
def test_presence_members_have_the_part_or_not(small, tmp_path):
    lines = (small.parent / "grabs.csv").read_text().splitlines()
    for i in range(1, 31, 2):  # every other station has no gravel
        name, x, y, mud, sand, gravel = lines[i].split(",")
        lines[i] = f"{name},{x},{y},{mud},{float(sand) + float(gravel):.4f},0"
    (small.parent / "grabs.csv").write_text("\n".join(lines) + "\n")
    result = build(
        small,
        ensemble={"members": 40},
        composition={"zeros": "presence"},
        validation={"folds": "random", "compare": []},
    )
    wet = result.found.target.active
    z = (result.members.mean - result.estimate.fractions)[wet] / (result.members.sd[wet] / np.sqrt(40))
    # A probability field keeps each cell's odds; it knows nothing of the correlation inside a cell, which the map integrates.
    assert np.abs(z[:, 2].mean()) < 1.0
    assert np.sqrt((z[:, 2] ** 2).mean()) < 2.0


@pytest.mark.slow
def test_each_member_may_have_a_file_of_its_own(small):
    result = build(small, ensemble={"members": 2, "files": "each"}, outputs={"precision": "float32"}, **PLAIN)
    out = result.found.recipe.output
    assert not (out / "members.nc").exists()
    with xr.open_dataset(out / "members" / "2" / "bed.nc") as second:
        assert second.attrs["realization"] == 2
        assert (second["class_fraction"].sum("class") == 1.0).all()
        assert "mixture_median_diameter" in second


@pytest.mark.slow
def test_members_are_the_same_bytes_again(built):
    once = built.found.recipe.output
    recipe = once.parent / "recipe.toml"
    build(recipe, output=once.parent / "b", ensemble={"members": 60, "above": {"mud": [0.25, 0.5]}}, **PLAIN)
    for name in ("members.nc", "members_summary.nc"):
        assert (once / name).read_bytes() == (once.parent / "b" / name).read_bytes()
    assert not [p for p in once.parent.iterdir() if p.name.startswith(".texture-")]


def test_what_cannot_be_is_told_before_the_work(small):
    with pytest.raises(
        RecipeError, match=r'ensemble.members = 5: members are drawn by kriging, and method.name = "nearest" is none'
    ):
        build(small, ensemble={"members": 5}, method={"name": "nearest"})
    with pytest.raises(RecipeError, match=r"ensemble.members = -1: expected greater than or equal to 0"):
        read_recipe(small, ["ensemble.members=-1"])
    with pytest.raises(RecipeError, match=r'ensemble: above: unknown name "clay"'):
        read_recipe(small, settings={"ensemble": {"above": {"clay": [0.5]}}})


def test_scratch_gives_back_what_was_put(tmp_path):
    values = np.random.default_rng(0).normal(size=(3, 10, 2))
    with Scratch(tmp_path / "s.bin", 3, 10, 2) as scratch:
        for j in (2, 0, 1):
            scratch.write(j, 6, values[j, 6:])
            scratch.write(j, 0, values[j, :6])
        np.testing.assert_array_equal(scratch.read(1), values[1])
        np.testing.assert_array_equal(scratch.read_all(4, 9), values[:, 4:9])
