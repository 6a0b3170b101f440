import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.bed import Water, class_properties, make_bed
from texture.bed.layers import drop_small, layer_fractions, to_classes
from texture.errors import BedError
from texture.recipe import Bed, Rim

from .conftest import make_target

CLASSES = [
    {"name": "flocs", "part": "mud", "share": 0.7, "kind": "floc", "grain": {"diameter_m": 5e-6}},
    {"name": "silt", "part": "mud", "share": 0.3, "grain": {"diameter_m": 30e-6}},
    {"name": "sand", "part": "sand", "grain": {"diameter_m": 250e-6}},
    {"name": "gravel", "part": "gravel", "grain": {"diameter_m": 8e-3, "density_kg_m3": 2700.0}},
]
STRONG = [{**c, "erosion": {"critical_stress_pa": 0.1 * (i + 1)}} for i, c in enumerate(CLASSES)]


def coast(rows=8, columns=6):
    active = np.ones((rows, columns), dtype=bool)
    active[:2] = False
    active[3, 3] = False
    return make_target(active)


def random_map(target, seed=1):
    fractions = np.random.default_rng(seed).dirichlet([1.0, 2.0, 0.5], target.n_cells)
    fractions[~target.active] = np.nan
    return fractions, np.where(target.active, 1, 0)


def settings_of(classes=CLASSES, **kwargs):
    layers = kwargs.pop("layers", [{"thickness_m": 0.1}, {"thickness_m": 1.9}])
    return Bed(classes=classes, layers=layers, **kwargs)


SOUTH = Rim(sides=("south",), width_cells=3, classes={"sand": 0.6, "gravel": 0.4})


def test_sums_thickness_and_mass():
    target = coast()
    bed = make_bed(*random_map(target), target, settings_of(), SOUTH)
    assert bed.class_fraction.shape == (4, 2, target.n_cells)
    assert np.abs(bed.class_fraction.sum(axis=0) - 1.0).max() <= 1e-12
    assert bed.class_fraction.min() >= 0.0
    expected = bed.erodible_thickness * bed.dry_density * bed.class_fraction
    assert bed.class_mass_content == pytest.approx(expected, rel=1e-12)
    wet = target.active
    assert (bed.erodible_thickness[:, wet] == np.array([[0.1], [1.9]])).all()
    assert (bed.erodible_thickness[:, ~wet] == 0.0).all()
    assert sum(bed.account.tonnes.values()) == pytest.approx(
        (bed.class_mass_content * target.area_m2).sum() / 1000.0, rel=1e-12
    )
    for name in ("dry_density", "porosity", "mixture_median_diameter", "skin_roughness_length"):
        assert np.isfinite(getattr(bed, name)).all()


def test_map_is_kept_where_nothing_touches_it():
    target = coast()
    fractions, evidence = random_map(target)
    bed = make_bed(fractions, evidence, target, settings_of(least_fraction=0.0))
    wet = target.active
    shares = np.array([0.7, 0.3, 1.0, 1.0])
    assert bed.class_fraction[:, 0, wet] == pytest.approx(
        fractions[wet][:, [0, 0, 1, 2]].T * shares[:, None], abs=1e-15
    )
    assert (bed.evidence[0, wet] == 1).all()
    assert (bed.evidence[1, wet] == 2).all()
    assert (bed.rim_weight == 0.0).all()
    assert set(bed.account.rim_tonnes.values()) == {0.0}


def test_rim_is_coarse_at_the_edge_and_flagged():
    target = coast()
    bed = make_bed(*random_map(target), target, settings_of(), SOUTH)
    edge = target.open_cells & (np.arange(target.n_cells) >= 7 * 6)
    assert bed.class_fraction[:, :, edge] == pytest.approx(
        np.broadcast_to(np.array([0.0, 0.0, 0.6, 0.4])[:, None, None], (4, 2, 6)), abs=1e-15
    )
    assert (bed.evidence[:, edge] == 3).all()
    assert bed.account.rim_cells == 18
    assert bed.account.rim_tonnes["flocs"] < 0.0 < bed.account.rim_tonnes["gravel"]
    assert (bed.evidence[:, ~target.active] == 4).all()


def test_rim_tonnes_are_the_difference_to_the_bed_without():
    target = coast()
    fractions, evidence = random_map(target)
    plain = settings_of(least_fraction=0.0)
    without, with_rim = (make_bed(fractions, evidence, target, plain, rim) for rim in (None, SOUTH))
    for name, moved in with_rim.account.rim_tonnes.items():
        assert moved == pytest.approx(with_rim.account.tonnes[name] - without.account.tonnes[name], rel=1e-9)


def test_least_fraction_drops_and_says_how_much():
    target = make_target(np.ones((2, 2)))
    fractions = np.tile([0.004, 0.946, 0.05], (4, 1))
    bed = make_bed(fractions, np.ones(4), target, settings_of(layers=[{"thickness_m": 1.0}]))
    assert bed.class_fraction[:, 0, 0] == pytest.approx([0.0, 0.0, 0.946 / 0.996, 0.05 / 0.996])
    kept = make_bed(fractions, np.ones(4), target, settings_of(layers=[{"thickness_m": 1.0}], least_fraction=0.0))
    for name in ("flocs", "silt"):
        assert bed.account.least_fraction_tonnes[name] == pytest.approx(kept.account.tonnes[name])
    assert bed.account.least_fraction_tonnes["sand"] == 0.0


def test_drop_small_keeps_the_largest():
    kept, dropped = drop_small(np.full((10, 1), 0.1), 0.15)
    assert kept[:, 0] == pytest.approx(np.full(10, 0.1))
    assert (dropped == 0.0).all()


def test_land_has_its_neighbours_bed_with_no_thickness():
    target = coast()
    bed = make_bed(*random_map(target), target, settings_of())
    rows = bed.class_fraction.reshape(4, 2, 8, 6)
    assert (rows[:, :, 0] == rows[:, :, 2]).all()
    assert bed.class_mass_content[:, :, ~target.active].max() == 0.0
    thick = make_bed(*random_map(target), target, settings_of(land_thickness_m=0.5))
    assert (thick.erodible_thickness[:, ~target.active] == 0.5).all()
    assert thick.account.tonnes == bed.account.tonnes  # only water is counted


def test_share_below_samples_by_hand():
    target = make_target(np.ones((3, 3)))
    same = make_bed(np.tile([0.0, 1.0, 0.0], (9, 1)), np.ones(9), target, settings_of())
    assert same.account.share_below_samples == pytest.approx(0.95)
    one = make_bed(np.tile([0.0, 1.0, 0.0], (9, 1)), np.ones(9), target, settings_of(layers=[{"thickness_m": 0.1}]))
    assert one.account.share_below_samples == 0.0


def test_a_given_composition_below():
    target = coast()
    layers = [{"thickness_m": 0.1}, {"thickness_m": 1.0, "fill": {"mud": 0.5, "gravel": 0.5}}]
    bed = make_bed(*random_map(target), target, settings_of(layers=layers))
    expected = np.array([0.35, 0.15, 0.0, 0.5])
    assert bed.class_fraction[:, 1] == pytest.approx(np.tile(expected[:, None], (1, target.n_cells)))
    assert (bed.evidence[1, target.active] == 5).all()


def test_mixture_stress_needs_all_classes():
    target = coast()
    assert make_bed(*random_map(target), target, settings_of()).critical_stress_for_erosion is None
    bed = make_bed(*random_map(target), target, settings_of(STRONG))
    stress = np.array([0.1, 0.2, 0.3, 0.4])
    assert bed.critical_stress_for_erosion == pytest.approx(np.tensordot(stress, bed.class_fraction, axes=1))
    assert bed.account.not_given[0] == "flocs: settling velocity"


def test_groups_of_cells_change_nothing(monkeypatch):
    target = coast()
    whole = make_bed(*random_map(target), target, settings_of(STRONG), SOUTH)
    monkeypatch.setattr("texture.bed.bed.CELLS_AT_ONCE", 5)
    parts = make_bed(*random_map(target), target, settings_of(STRONG), SOUTH)
    for name in ("class_fraction", "class_mass_content", "porosity", "critical_stress_for_erosion"):
        np.testing.assert_array_equal(getattr(parts, name), getattr(whole, name))
    assert parts.account.tonnes == pytest.approx(whole.account.tonnes, rel=1e-12)


def test_the_same_bed_twice_and_a_useful_repr():
    target = coast()
    one, two = (make_bed(*random_map(target), target, settings_of(), SOUTH) for _ in range(2))
    assert one.class_fraction.tobytes() == two.class_fraction.tobytes()
    assert repr(one).startswith("<Bed: 4 classes, 2 layers, 48 cells")


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32 - 1), st.floats(0.0, 0.19), st.integers(1, 4))
def test_always_closed(seed, least, width):
    target = coast()
    rim = Rim(sides=("south", "west"), width_cells=min(width, 4), composition={"sand": 0.97, "gravel": 0.03})
    bed = make_bed(*random_map(target, seed), target, settings_of(least_fraction=least), rim)
    assert np.abs(bed.class_fraction.sum(axis=0) - 1.0).max() <= 1e-12
    positive = bed.class_fraction[bed.class_fraction > 0.0]
    assert positive.min() >= least


def test_holes_and_bad_sums_are_refused():
    target = coast()
    fractions, evidence = random_map(target)
    holed = fractions.copy()
    holed[20] = np.nan
    with pytest.raises(BedError, match="1 water cells of little grid have no fractions, the first is row 3, column 2"):
        make_bed(holed, evidence, target, settings_of())
    with pytest.raises(BedError, match="not summing to 1"):
        make_bed(fractions * 1.01, evidence, target, settings_of())
    with pytest.raises(BedError, match="expected \\(48, 3\\)"):
        make_bed(fractions[:5], evidence, target, settings_of())


def test_layers_of_the_recipe_only():
    classes = class_properties(settings_of().classes, Water())
    surface = to_classes(np.array([[0.2, 0.7, 0.1]]), classes)
    stacked = layer_fractions(surface, settings_of().layers, classes)
    assert (stacked[:, 0] == stacked[:, 1]).all()
