"""Layers from cores, from the spreadsheet to `bed.nc`."""

import json
from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from texture import build, read_stations
from texture.bed import make_bed
from texture.core_layers import core_layers, cores_in, layer_depths
from texture.errors import RecipeError
from texture.recipe import Bed
from texture.structure import Covariance, CovarianceSet, Structure

QUICK = {"validation": {"count": 3, "compare": []}, "composition": {"zeros": "replace"}, "outputs": {"geotiff": False}}
LAYERS = [{"thickness_m": 0.1}, {"thickness_m": 0.4, "fill": "cores"}, {"thickness_m": 1.0}]


@pytest.fixture
def cored(small):
    """The small recipe with a core near (505 km, 4903 km): to 0.2 m sandy, to 0.4 m gravel, below that in words."""
    table = small.parent / "grabs.csv"
    lines = table.read_text().splitlines()
    core = [
        "C1,505250,4903250,0.5,0.4,0.1,0,10",
        "C1,505250,4903250,0.2,0.8,0.0,10,20",
        "C1,505250,4903250,0.1,0.3,0.6,20,40",
        "C1,505250,4903250,,,,40,60",
    ]
    grabs = [line + ",0,10" for line in lines[1:]]
    table.write_text("\n".join([lines[0] + ",top (cm),bottom (cm)", *grabs, *core]) + "\n")
    return small


def test_cores_are_weighted_by_thickness(cored):
    stations = read_stations(cored)
    cores = cores_in(stations, 0.1, 0.5)
    # 10 cm of one and 20 cm of the other, in a layer of 40 cm
    np.testing.assert_allclose(cores.fractions, [[0.4 / 3, 1.4 / 3, 1.2 / 3]], atol=1e-12)
    np.testing.assert_allclose(cores.covered, [0.75])
    np.testing.assert_allclose(cores_in(stations, 0.3, 2.0).fractions, [[0.1, 0.3, 0.6]])
    assert cores_in(stations, 0.45, 2.0).covered.size == 0
    np.testing.assert_allclose(layer_depths(Bed(layers=LAYERS)), [[0.0, 0.1], [0.1, 0.5], [0.5, 1.5]])


def test_a_build_with_cores(cored, tmp_path):
    result = build(cored, output=tmp_path / "out", bed={"layers": LAYERS, "least_fraction": 0.0}, rim=None, **QUICK)
    found, core = result.found, result.cores[1]
    target, mapper = found.target, found.mapper
    # Simple kriging from one core by hand: difference × covariance to the core over the variance of what it says.
    here = found.plane.to_metres(*(found.stations.deeper[c].to_numpy()[:1] for c in ("longitude", "latitude")))
    centres = found.plane.to_metres(target.longitude, target.latitude)
    surface = mapper.expected(*mapper.predict(here))
    difference = mapper.logratio.forward([[0.4 / 3, 1.4 / 3, 1.2 / 3]]) - mapper.logratio.forward(surface)
    distance = np.linalg.norm(centres - here, axis=1)
    for k, c in enumerate(list(mapper.structure)[:2]):
        total = c.sill + c.noise
        covered = np.where(distance < 1e-3, c.sill, total - c.variogram(np.maximum(distance, 1e-3)))
        np.testing.assert_allclose(core.shift[:, k], difference[0, k] * covered / total, atol=1e-9)
    far, near = distance.argmax(), distance.argmin()
    moved = np.abs(result.bed.class_fraction[:, 1] - result.bed.class_fraction[:, 0]).max(axis=0)
    assert moved[near] > 0.1
    assert moved[far] < moved[near]
    np.testing.assert_array_equal(result.bed.class_fraction[:, 2], result.bed.class_fraction[:, 0])
    np.testing.assert_allclose(result.bed.class_fraction.sum(axis=0), 1.0, atol=1e-12)
    np.testing.assert_array_equal(result.bed.evidence[1] == 1, distance <= found.reach_m)
    assert 0 < (result.bed.evidence[1] == 1).sum() < target.n_cells
    with xr.open_dataset(tmp_path / "out" / "bed.nc") as data:
        np.testing.assert_array_equal(data["evidence"].values.reshape(3, -1), result.bed.evidence)
    assert any("layer 2 from 1 core that covers 75 % of" in line for line in result.summary_lines())
    assert result.summary()["core_layers"][0]["cores"] == 1
    json.dumps(result.summary())
    assert "Layer 2 is filled from 1 core" in (tmp_path / "out" / "report.html").read_text()

    # With a range that ends at 2 km, the layer is the very map beyond it.
    short = CovarianceSet([Covariance([Structure("spherical", 1.0, 2_000.0)])] * 2)
    ended = core_layers(replace(found, mapper=replace(mapper, structure=short)))
    beyond = distance >= 2_000.0
    assert (ended[1].shift[beyond] == 0.0).all()
    assert (ended[1].shift[~beyond] != 0.0).any()
    bed = make_bed(result.estimate.fractions, result.estimate.evidence, target, found.recipe.bed, cores=ended)
    np.testing.assert_array_equal(bed.class_fraction[:, 1, beyond], bed.class_fraction[:, 0, beyond])


def test_members_and_cases_have_the_layer_too(cored, tmp_path):
    from texture.pipeline import cases

    members = {"members": 2}
    result = build(cored, output=tmp_path / "out", bed={"layers": LAYERS}, rim=None, ensemble=members, **QUICK)
    wet, sampled = result.found.target.active, result.cores[1].sampled
    with xr.open_dataset(tmp_path / "out" / "members.nc") as data:
        apart = np.abs(data["class_fraction"].isel(layer=1) - data["class_fraction"].isel(layer=0)).max("class")
        assert (apart.max(("y", "x")) > 0.05).all()
    vary = {"design": "one_at_a_time", "vary": [{"what": "porosity", "factors": [1.1]}], "files": "one"}
    cases(cored, output=tmp_path / "cases", bed={"layers": LAYERS}, rim=None, sensitivity=vary, **QUICK)
    with xr.open_dataset(tmp_path / "cases" / "cases.nc") as data:
        fraction = data["class_fraction"].values
    assert np.isfinite(fraction).all()
    assert wet.sum() > sampled.sum()


def test_layers_that_no_core_reaches_are_refused_before_the_work(cored, small, tmp_path):
    layers = [{"thickness_m": 0.6}, {"thickness_m": 1.0, "fill": "cores"}]
    with pytest.raises(
        RecipeError, match=r"layers\[1\].fill = \"cores\": no core tells .* of 0.6 to 1.6 m .* ends at 0.6 m"
    ):
        build(cored, output=tmp_path / "out", bed={"layers": layers}, **QUICK)


def test_without_any_core(small, tmp_path):
    with pytest.raises(RecipeError, match=r"no sample lies below intake.surface_m = 0.1 m; expected at least one"):
        build(small, output=tmp_path / "out", bed={"layers": LAYERS}, **QUICK)
