"""Packing, strength by layer, hiding, least thickness, land: each setting by hand and in a whole bed."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.bed import make_bed
from texture.bed.hiding import hiding_factor
from texture.bed.mixture_packing import volumes_add_up
from texture.errors import BedError
from texture.recipe import Bed, BedClass

from .test_build import STRONG, coast, random_map, settings_of

MUD, SAND, GRAVEL = 0, 1, 2
THREE = [
    {"name": "mud", "part": "mud", "grain": {"diameter_m": 20e-6}, "erosion": {"critical_stress_pa": 0.1}},
    {"name": "sand", "part": "sand", "grain": {"diameter_m": 250e-6}},
    {"name": "gravel", "part": "gravel", "grain": {"diameter_m": 8e-3}},
]


def one_map(target, fractions):
    return np.tile(fractions, (target.n_cells, 1)).astype(float), target.active.astype(int)


def packed(**densities):
    return [c | {"packing": {"dry_density_kg_m3": densities[c["name"]]}} for c in THREE]


def test_volumes_of_the_classes_add_up():
    target = coast()
    classes = packed(mud=400.0, sand=1600.0, gravel=1700.0)
    bed = make_bed(*one_map(target, [0.25, 0.75, 0.0]), target, Bed(classes=classes, packing="class"))
    # A kilogram: 0.25 / 400 + 0.75 / 1600 = 0.00109375 m3 (Colby 1963)
    assert bed.dry_density[0] == pytest.approx(1 / 0.00109375, rel=1e-12)
    assert bed.porosity[0] == pytest.approx(1 - 1 / 0.00109375 / 2650.0, rel=1e-12)
    assert bed.class_mass_content == pytest.approx(
        bed.erodible_thickness * bed.dry_density * bed.class_fraction, rel=1e-12
    )
    assert sum(bed.account.tonnes.values()) == pytest.approx(
        (bed.class_mass_content * target.area_m2).sum() / 1e3, rel=1e-12
    )


@given(st.lists(st.floats(0.0, 1.0), min_size=3, max_size=3).filter(lambda f: sum(f) > 1e-3))
def test_a_mixture_lies_between_its_classes(values):
    fraction, alone = np.array(values) / sum(values), np.array([400.0, 1600.0, 1700.0])
    pores, density = volumes_add_up(fraction, np.full(3, 2650.0), alone)
    assert alone.min() - 1e-9 <= density <= alone.max() + 1e-9
    assert 0.0 < pores < 1.0


def test_classes_without_a_density_take_it_from_their_size():
    target = coast()
    bed = make_bed(*one_map(target, [0.0, 1.0, 0.0]), target, Bed(classes=THREE, packing="class"))
    mixture = make_bed(*one_map(target, [0.0, 1.0, 0.0]), target, Bed(classes=THREE))
    assert bed.dry_density == pytest.approx(mixture.dry_density, rel=1e-12)


def test_density_given_for_each_layer():
    target = coast()
    layers = [{"thickness_m": 0.1, "dry_density_kg_m3": 500.0}, {"thickness_m": 1.0, "dry_density_kg_m3": 1200.0}]
    bed = make_bed(*one_map(target, [1.0, 0.0, 0.0]), target, Bed(classes=THREE, layers=layers, packing="layer"))
    assert np.unique(bed.dry_density, axis=1).tolist() == [[500.0], [1200.0]]
    assert bed.porosity[:, 0] == pytest.approx([1 - 500 / 2650, 1 - 1200 / 2650])
    layers[1]["dry_density_kg_m3"] = 2650.0
    with pytest.raises(
        BedError, match=r"bed.layers\[1\].dry_density_kg_m3 = 2650 leaves no pores between grains of 2650"
    ):
        make_bed(*one_map(target, [1.0, 0.0, 0.0]), target, Bed(classes=THREE, layers=layers, packing="layer"))


def test_mud_gets_stronger_with_depth():
    target = coast()
    weak = [THREE[0] | {"erosion": {}}, *THREE[1:]]
    layers = [
        {"thickness_m": 0.1, "critical_stress_pa": {"mud": 0.1}},
        {"thickness_m": 1.0, "critical_stress_pa": {"mud": 0.8, "sand": 0.3}},
    ]
    bed = make_bed(*one_map(target, [0.5, 0.5, 0.0]), target, Bed(classes=weak, layers=layers))
    sand = bed.classes.critical_stress_pa[SAND]
    assert bed.class_critical_stress[:2].tolist() == [[0.1, 0.8], [sand, 0.3]]
    assert bed.critical_stress_for_erosion[:, 0] == pytest.approx([(0.1 + sand) / 2, 0.55])
    assert "mud: critical stress" not in bed.account.not_given
    only_top = [layers[0], {"thickness_m": 1.0}]
    bed = make_bed(*one_map(target, [0.5, 0.5, 0.0]), target, Bed(classes=weak, layers=only_top))
    assert bed.critical_stress_for_erosion is None
    assert "mud: critical stress" in bed.account.not_given


def test_hiding_of_two_sizes_by_hand():
    """Wu, Wang & Jia (2000), equations from memory: p_exposed = Σ p_j d_i / (d_i + d_j), factor (pe / ph)^-0.6."""
    target = coast()
    bed = make_bed(*one_map(target, [0.0, 0.8, 0.2]), target, Bed(classes=THREE, hiding="wu", least_fraction=0.0))
    d = bed.classes.diameter_m
    exposed = 0.8 * 0.5 + 0.2 * d[SAND] / (d[SAND] + d[GRAVEL])
    assert bed.hiding_exposure_factor[SAND, 0] == pytest.approx((exposed / (1 - exposed)) ** -0.6)
    assert (bed.hiding_exposure_factor[MUD] == 1.0).all()
    assert (bed.hiding_exposure_factor[SAND] > 1.0).all()
    assert (bed.hiding_exposure_factor[GRAVEL] < 1.0).all()
    tau = bed.classes.critical_stress_pa * bed.hiding_exposure_factor[:, 0, 0]
    assert bed.critical_stress_for_erosion[0] == pytest.approx(0.8 * tau[SAND] + 0.2 * tau[GRAVEL])


def test_hiding_moves_thresholds_towards_one_another():
    """In natural mixtures all sizes move at nearly one stress: common practice, no source."""
    d = np.array([0.5e-3, 2e-3, 8e-3])
    factor = hiding_factor(np.full(3, 1 / 3), d, np.array([True, True, True]))
    alone = d  # Shields with one constant: the critical stress is proportional to the diameter
    assert np.ptp(np.log(alone * factor)) < np.ptp(np.log(alone))
    assert (np.diff(alone * factor) > 0).all()


@given(st.lists(st.floats(0.0, 1.0), min_size=4, max_size=4).filter(lambda f: sum(f) > 1e-3))
def test_one_size_and_cohesive_grains_are_not_touched(values):
    fraction = (np.array(values) / sum(values))[:, None]
    same = hiding_factor(fraction, np.array([1e-5, 1e-3, 1e-3, 1e-3]), np.array([False, True, True, True]))
    assert same == pytest.approx(1.0, rel=1e-12)
    none = hiding_factor(fraction, np.array([1e-5, 1e-3, 2e-3, 3e-3]), np.zeros(4, dtype=bool))
    assert (none == 1.0).all()


def test_no_layer_is_thinner_than_the_minimum():
    target = coast()
    bed = make_bed(*random_map(target), target, settings_of(STRONG, minimum_thickness_m=0.001))
    assert (bed.erodible_thickness[:, ~target.active] == 0.001).all()
    assert (bed.erodible_thickness[0, target.active] == 0.1).all()


def test_land_in_classes_of_its_own():
    target = coast()
    bed = make_bed(*random_map(target), target, settings_of(STRONG, land_fill={"silt": 0.5, "sand": 0.5}))
    assert np.unique(bed.class_fraction[:, :, ~target.active], axis=2)[:, 0, 0].tolist() == [0.0, 0.5, 0.5, 0.0]
    gravel = make_bed(*random_map(target), target, settings_of(STRONG, land_fill={"gravel": 1.0}))
    assert (gravel.class_fraction[3][:, ~target.active] == 1.0).all()


def test_layers_filled_in_classes():
    target = coast()
    layers = [{"thickness_m": 0.1}, {"thickness_m": 1.0, "fill": {"silt": 0.25, "gravel": 0.75}}]
    bed = make_bed(*random_map(target), target, settings_of(STRONG, layers=layers))
    assert np.unique(bed.class_fraction[:, 1, target.active], axis=1).tolist() == [[0.0], [0.25], [0.0], [0.75]]


def test_flocs_have_no_mass_in_the_bed_unless_set():
    floc = {
        "name": "flocs", "part": "mud", "kind": "floc", "grain": {"diameter_m": 5e-6},
        "water_column": {"effective_density_kg_m3": 80.0},
    }  # fmt: skip
    assert BedClass(**floc).share == 0.0
    target = coast()
    bed = make_bed(*random_map(target), target, Bed(classes=[*THREE, floc]))
    assert (bed.class_fraction[3] == 0.0).all()
    assert bed.account.tonnes["flocs"] == 0.0
    assert bed.critical_stress_for_erosion is not None  # flocs have no strength, but no mass here either
    assert "flocs: effective density" not in bed.account.not_given
    assert "flocs: settling velocity" in bed.account.not_given


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"classes": packed(mud=400, sand=1600, gravel=1700)}, 'packing.dry_density_kg_m3 acts with packing = "class" only'),
        ({"classes": packed(mud=400, sand=2700, gravel=1700), "packing": "class"}, "2700 leaves no pores between grains of 2650"),
        ({"packing": "layer"}, r'layers\[0\].dry_density_kg_m3: packing = "layer" needs it'),
        ({"layers": [{"thickness_m": 1.0, "dry_density_kg_m3": 900.0}]}, 'acts with packing = "layer" only'),
        ({"layers": [{"thickness_m": 0.1, "critical_stress_pa": {"mdu": 1.0}}]}, 'unknown name "mdu"; did you mean "mud"'),
        ({"minimum_thickness_m": 0.2}, r"layers\[0\].thickness_m = 0.1 is less than minimum_thickness_m = 0.2"),
        ({"classes": [THREE[0] | {"water_column": {"effective_density_kg_m3": 80}}, *THREE[1:]]}, 'is of flocs; set kind = "floc"'),
    ],
)  # fmt: skip
def test_settings_that_do_not_fit(settings, message):
    with pytest.raises(ValueError, match=message):
        Bed(**{"classes": THREE, **settings})
