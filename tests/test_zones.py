"""Zones through a whole run: map, validation, evidence, inventory."""

import geopandas
import numpy as np
import pandas as pd
import pytest
from shapely.geometry import box

from texture import build
from texture.errors import RecipeError
from texture.predict import Kriging
from texture.recipe.file import read_recipe

EAST = (505_000.0, 4_900_000.0, 510_000.0, 4_906_000.0)
QUICK = {"validation": {"count": 3, "compare": []}, "outputs": {"geotiff": False}, "composition": {"zeros": "replace"}}


def polygons(folder, *boxes, name="zone.gpkg"):
    geopandas.GeoDataFrame(geometry=[box(*b) for b in boxes], crs="EPSG:32626").to_file(folder / name)
    return str(folder / name)


def test_a_hard_edge(small, tmp_path):
    zone = {"name": "channel", "polygons": polygons(tmp_path, EAST)}
    result = build(small, output=tmp_path / "out", zones=[zone], rim=None, **QUICK)
    found, zones = result.found, result.found.mapper.zones
    learned, target = found.validation.learned, found.target
    number = zones.stations.zone[found.observations.rows]
    assert set(number) == {0, 1}
    place = found.plane.to_metres(target.longitude, target.latitude)
    for i in (0, 1):  # the map of each side is that of its own stations alone, with the shared structure
        own, cells = number == i, zones.cells.zone == i
        alone = Kriging(found.mapper.structure).fit(
            learned.observations.points[own], learned.values[own], learned.noise[own]
        )
        mean, _ = alone.predict(place[cells])
        if result.points_per_side == 1:
            np.testing.assert_allclose(result.estimate.mean[cells], mean, rtol=1e-5, atol=1e-6)
        held = found.validation.chosen.predicted[own]
        assert np.isfinite(held).all()
    np.testing.assert_allclose(result.bed.class_fraction.sum(axis=0), 1.0, atol=1e-12)
    table = pd.read_csv(tmp_path / "out" / "inventory.csv")
    assert set(table["zone"]) == {"all", "channel", "outside the zones"}
    tonnes = table.groupby("zone")["tonnes"].sum()
    assert tonnes["all"] == pytest.approx(tonnes["channel"] + tonnes["outside the zones"], rel=1e-9)
    assert any("channel: 120 cells" in line for line in result.summary_lines())


def test_given_mean_and_empty_zones(small, tmp_path):
    corner = (500_000.0, 4_900_000.0, 501_000.0, 4_900_500.0)
    river = {"name": "river", "polygons": polygons(tmp_path, corner, name="river.gpkg")}
    shelf = {"name": "shelf", "polygons": polygons(tmp_path, EAST), "kind": "mean"}
    given = {**river, "kind": "given", "composition": {"sand": 0.75, "gravel": 0.25}}
    result = build(small, output=tmp_path / "out", zones=[given, shelf], rim=None, **QUICK)
    cells = result.found.mapper.zones.cells.zone
    assert result.estimate.fractions[cells == 1].tolist() == [[0.0, 0.75, 0.25]] * 2
    assert (result.estimate.evidence[cells == 1] == 5).all()
    assert (result.estimate.evidence[cells == 2] == 6).all()
    assert np.ptp(result.estimate.fractions[cells == 2], axis=0).max() < 1e-12
    held = result.found.validation.chosen.predicted[
        result.found.mapper.zones.stations.zone[result.found.observations.rows] == 2
    ]
    assert np.unique(held.round(12), axis=0).shape[0] <= 3  # one mean in each fold
    empty = build(small, output=tmp_path / "out2", zones=[river], rim=None, **QUICK)
    assert (empty.estimate.evidence[cells == 1] == 6).all()
    assert any(
        'no station of its own: the mean of the whole map, flagged; give it kind = "given"' in s
        for s in empty.summary_lines()
    )


def test_a_soft_edge_has_no_jump(small, tmp_path):
    wide = (505_000.0, 4_880_000.0, 530_000.0, 4_930_000.0)  # its other edges are far from the grid
    given = {"name": "fill", "polygons": polygons(tmp_path, wide), "kind": "given", "composition": {"mud": 1.0}}
    given["soft_edge_m"] = 4_000.0
    result = build(small, output=tmp_path / "out", zones=[given], rim=None, **QUICK)
    mud = result.estimate.fractions[:, 0].reshape(12, 20)
    assert (mud[:, 14:] == 1.0).all()
    assert np.abs(np.diff(mud[:, 5:15], axis=1)).max() < 0.35


@pytest.mark.parametrize(
    ("zone", "said"),
    [
        ({"kind": "given"}, 'kind = "given" and composition belong together'),
        ({"polygons": None}, "give either polygons, or variable with values"),
        ({"kind": "given", "composition": {"mud": 0.5}}, "fractions sum to 0.5, expected 1"),
        ({"values": [1]}, "file and values are of a variable, which is missing"),
        ({"name": "all"}, 'the name "all" is kept for all cells'),
    ],
)
def test_what_does_not_fit_is_said(small, tmp_path, zone, said):
    whole = {"name": "river", "polygons": polygons(tmp_path, EAST)} | zone
    with pytest.raises(RecipeError, match=said):
        read_recipe(small, settings={"zones": [{k: v for k, v in whole.items() if v is not None}]})


def test_a_zone_elsewhere(small, tmp_path):
    zone = {"name": "far", "polygons": polygons(tmp_path, (600_000.0, 4_900_000.0, 601_000.0, 4_901_000.0))}
    with pytest.raises(RecipeError, match='zones "far": covers no water cell'):
        build(small, output=tmp_path / "out", zones=[zone], **QUICK)


def test_censoring_would_cross_the_edge(small, tmp_path):
    zone = {"name": "far", "polygons": polygons(tmp_path, EAST)}
    with pytest.raises(RecipeError, match='"censor" fills in each station from its neighbours, across the hard edges'):
        read_recipe(small, settings={"zones": [zone], "composition": {"zeros": "censor"}})


def test_zones_that_ask_no_station_are_no_emptier_for_a_radius(small, tmp_path):
    river = {
        "name": "river",
        "polygons": polygons(tmp_path, (500_000.0, 4_900_000.0, 501_000.0, 4_900_500.0), name="r.gpkg"),
    }
    given = {**river, "kind": "given", "composition": {"sand": 0.75, "gravel": 0.25}}
    shelf = {"name": "shelf", "polygons": polygons(tmp_path, EAST), "kind": "mean"}
    near = {"neighbourhood": "nearest", "radius_m": 300.0}
    result = build(small, output=tmp_path / "out", zones=[given, shelf], rim=None, method=near, **QUICK)
    zone, shown = result.found.mapper.zones.cells.zone, result.estimate.within_radius.fractions
    assert np.isfinite(shown[zone > 0]).all()
    assert np.isnan(shown[zone == 0]).any()


def test_the_effect_of_the_limit_is_that_of_the_map_in_its_zones(small, tmp_path):
    given = {"name": "east", "polygons": polygons(tmp_path, EAST), "kind": "given", "composition": {"mud": 1.0}}
    result = build(
        small,
        output=tmp_path / "out",
        zones=[given],
        rim=None,
        target={"points_per_cell": 1},
        method={"name": "best"},
        **QUICK,
    )
    effect = result.found.validation.limit_effect
    np.testing.assert_allclose(effect.mean, np.nanmean(result.estimate.fractions, axis=0), atol=1e-9)
    assert effect.mean[0] > 0.5
