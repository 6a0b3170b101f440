"""Every setting acts: the same small job with one thing changed."""

import numpy as np
import pytest

from texture import build
from texture.errors import BedError, RecipeError

pytestmark = pytest.mark.slow

QUICK = {"validation": {"count": 2, "compare": []}, "outputs": {"geotiff": False}}


def bed(small, name="out", **settings):
    return build(small, output=small.parent / name, **{**QUICK, **settings})


@pytest.fixture
def plain_small(small):
    return bed(small, "plain")


@pytest.mark.parametrize("name", ["mean", "nearest", "inverse_distance"])
def test_methods_without_variance_of_their_own_make_a_whole_bed(small, name):
    result = bed(small, method={"name": name})
    np.testing.assert_allclose(result.bed.class_fraction.sum(axis=0), 1.0, atol=1e-12)
    low, middle, high = result.estimate.quantiles  # from the spread of held-out errors
    assert (low <= middle).all()
    assert (middle <= high).all()
    assert (low < high).any()
    assert result.look is None
    text = (small.parent / "out" / "report.html").read_text()
    assert "no second opinion was sought" in text


def test_the_mean_is_the_same_everywhere_and_nearest_is_not(small):
    mean = bed(small, "a", method={"name": "mean"}).estimate.fractions
    nearest = bed(small, "b", method={"name": "nearest"}).estimate.fractions
    assert np.ptp(mean, axis=0).max() < 1e-12
    assert np.ptp(nearest[:, 0]) > 0.5


@pytest.mark.parametrize("kind", ["ilr", "alr", "shares"])
def test_other_coordinates_give_nearly_the_same_map(small, plain_small, kind):
    result = bed(small, composition={"logratio": kind})
    np.testing.assert_allclose(result.estimate.fractions.sum(axis=1), 1.0, atol=1e-12)
    difference = np.abs(result.estimate.fractions - plain_small.estimate.fractions)
    assert 0.0 < difference.mean() < 0.05
    low, _, high = result.estimate.quantiles
    assert (low <= high).all()


def test_another_tree_is_another_partition(small):
    result = bed(small, composition={"tree": [["mud", "sand"], "gravel"], "zeros": "replace"})
    assert result.found.mapper.column_names == ("ln((mud + sand) / gravel)", "ln(mud / sand)")


@pytest.mark.parametrize("zeros", ["replace", "censor", "presence"])
def test_every_treatment_of_zeros_makes_a_whole_bed(small, zeros):
    composition = {"zeros": zeros, "detection_limit": 0.06}  # a third of these gravels lie below it
    result = bed(small, composition=composition, method={"name": "kriging"})
    np.testing.assert_allclose(result.estimate.fractions.sum(axis=1), 1.0, atol=1e-12)
    low, middle, high = result.estimate.quantiles
    assert ((low <= middle) & (middle <= high)).all()
    assert (low >= 0.0).all()
    assert (high <= 1.0).all()
    assert (result.estimate.texture_class > 0).all()
    assert result.found.mapper.column_names[:2] == result.found.mapper.logratio.coordinate_names
    assert np.isfinite(result.found.validation.chosen.predicted).all()


def test_censoring_needs_a_variance_and_coordinates_that_compare_two_sides(small):
    with pytest.raises(RecipeError, match="needs a method with a variance"):
        bed(small, composition={"zeros": "censor"}, method={"name": "nearest"})
    with pytest.raises(RecipeError, match='"presence" works with logratio = tree, found "ilr"'):
        bed(small, composition={"zeros": "presence", "logratio": "ilr"})


@pytest.mark.parametrize(
    "settings",
    [
        {"method": {"fit": "variogram"}},
        {"method": {"neighbours": 6}},
        {"method": {"neighbourhood": "nearest", "neighbours": 8}},
        {"method": {"estimate": "median"}},
        {"composition": {"detection_limit": 0.05}},
        {"target": {"points_per_cell": 9}},
    ],
    ids=lambda s: next(f"{k}.{j}" for k, v in s.items() for j in v),
)
def test_the_map_follows_its_settings(small, plain_small, settings):
    changed = bed(small, **settings)
    assert np.abs(changed.estimate.fractions - plain_small.estimate.fractions).max() > 1e-6
    np.testing.assert_allclose(changed.estimate.fractions.sum(axis=1), 1.0, atol=1e-12)


@pytest.mark.parametrize("folds", ["matched", "random", "blocks", "each"])
def test_every_fold_design_runs(small, folds):
    result = bed(small, validation={"folds": folds, "count": 3, "compare": ["mean"]})
    found = result.found.validation
    assert found.folds.kind == folds
    assert [m.method for m in found.methods] == ["kriging", "mean"]
    assert found.chosen.score("mud", "rmse") < found.methods[1].score("mud", "rmse")


def test_rim_by_metres_with_a_composition_and_profiles(small, plain_small):
    rim = {
        "width_cells": None,
        "width_m": 1200.0,
        "classes": None,
        "composition": {"sand": 0.5, "gravel": 0.5},
        "sides": "open",
    }
    result = bed(small, rim=rim | {"profile": "linear"})
    edge = result.found.target.open_cells
    np.testing.assert_allclose(result.bed.class_fraction[:, 0, edge].T, [[0.0, 0.5, 0.5]] * int(edge.sum()))
    step = bed(small, "step", rim=rim | {"profile": "step"})
    assert set(np.unique(step.bed.rim_weight)) == {0.0, 1.0}
    assert not np.array_equal(result.bed.rim_weight, plain_small.bed.rim_weight)


def test_layers_fill_and_least_fraction(small):
    layers = [{"thickness_m": 0.2}, {"thickness_m": 1.0, "fill": {"gravel": 1.0}}]
    result = bed(small, bed={"layers": layers, "least_fraction": 0.1, "land_thickness_m": 0.0})
    beside_rim = result.bed.rim_weight == 0.0
    assert (result.bed.class_fraction[2, 1, beside_rim] == 1.0).all()
    first = result.bed.class_fraction[:, 0]
    assert ((first == 0.0) | (first >= 0.1)).all()
    assert sum(result.bed.account.least_fraction_tonnes.values()) > 0.0
    assert (result.bed.evidence[1] == 5).sum() == result.found.target.n_cells - (result.bed.rim_weight > 0).sum()


def test_water_changes_what_is_computed(small, plain_small):
    warm = bed(small, bed={"water": {"temperature_c": 25.0, "salinity": 0.0}})
    sand = plain_small.bed.classes.names.index("sand")
    assert warm.bed.classes.settling_velocity_m_s[sand] > plain_small.bed.classes.settling_velocity_m_s[sand]


def test_seed_moves_the_folds_but_not_the_map(small):
    # Shares leave nothing for held-out error to choose: a treatment of zeros that it picks may follow the folds.
    shares = {"composition": {"logratio": "shares"}, "validation": {"folds": "random", "count": 2, "compare": []}}
    first, other = (bed(small, f"seed_{seed}", seed=seed, **shares) for seed in (1, 7))
    # Intervals and expected fractions learn from the folds; what is kriged does not.
    assert np.array_equal(other.estimate.mean, first.estimate.mean)
    assert not np.array_equal(other.found.validation.folds.labels, first.found.validation.folds.labels)


def test_geotiff_cell_size_is_for_resamples(small):
    result = bed(small, outputs={"geotiff": True})
    import rasterio

    with rasterio.open(small.parent / "out" / "geotiff" / "mud_fraction.tif") as image:
        assert image.bounds == (500_000.0, 4_900_000.0, 510_000.0, 4_906_000.0)
        assert image.crs.to_epsg() == 32626
        np.testing.assert_allclose(image.read(1).ravel(), result.estimate.fractions[:, 0], atol=1e-6)


def test_mistakes_that_only_the_whole_shows(small):
    with pytest.raises(RecipeError, match='part "clay" is not one of'):
        bed(small, bed={"classes": [{"name": "a", "part": "clay"}]})
    with pytest.raises(BedError, match="rim"):
        bed(small, rim={"width_cells": 400})
