"""Changed bed settings: what follows from what, and classes that must not change places."""

from __future__ import annotations

import numpy as np
import pytest

from texture.bed import Water, class_properties
from texture.bed.mixture_packing import packer, repacked
from texture.bed.sensitivity import OrderError, change_bed
from texture.errors import BedError
from texture.recipe import Bed, BedClass, Grain, Layer, Rim, Vary

MUD = BedClass(
    name="mud", part="mud", grain=Grain(diameter_m=20e-6), water_column={"settling_velocity_m_s": 2e-4},
    erosion={"critical_stress_pa": 0.1, "rate": 5e-5},
)  # fmt: skip
SAND = BedClass(name="sand", part="sand", grain=Grain(diameter_m=250e-6))
GRAVEL = BedClass(name="gravel", part="gravel", grain=Grain(diameter_m=8e-3))
BED = Bed(
    layers=(Layer(thickness_m=0.1), Layer(thickness_m=2.0, critical_stress_pa={"mud": 0.8})),
    classes=(MUD, SAND, GRAVEL),
)


def changed(*changes, rim=None):
    return change_bed(BED, rim, {Vary(**vary): value for vary, value in changes})


def test_factors_multiply_and_values_replace():
    case = changed(
        ({"what": "settling_velocity", "classes": ("mud",), "factors": (2.0,)}, 2.0),
        ({"what": "erosion_rate", "values": (1e-4,)}, 1e-4),
        ({"what": "thickness", "layers": (2,), "factors": (0.5,)}, 0.5),
    )
    mud = case.bed.classes[0]
    assert mud.water_column.settling_velocity_m_s == 4e-4
    assert mud.erosion.rate == 1e-4
    assert [c.erosion.rate for c in case.bed.classes[1:]] == [None, None]  # only where there was one
    assert [layer.thickness_m for layer in case.bed.layers] == [0.1, 1.0]
    assert BED.classes[0].erosion.rate == 5e-5


def test_strength_of_layers_follows_the_class():
    case = changed(({"what": "critical_stress", "classes": ("mud",), "factors": (3.0,)}, 3.0))
    assert case.bed.classes[0].erosion.critical_stress_pa == pytest.approx(0.3)
    assert case.bed.layers[1].critical_stress_pa == {"mud": pytest.approx(2.4)}


def test_what_is_computed_follows_a_diameter_before_it_is_multiplied():
    case = changed(
        ({"what": "settling_velocity", "classes": ("sand",), "factors": (1.5,)}, 1.5),
        ({"what": "diameter", "classes": ("sand",), "factors": (2.0,)}, 2.0),
    )
    finer = class_properties([SAND.model_copy(update={"grain": Grain(diameter_m=500e-6)})], Water(10.0, 35.0))
    assert case.bed.classes[1].grain.diameter_m == 500e-6
    assert case.bed.classes[1].water_column.settling_velocity_m_s == pytest.approx(1.5 * finer.settling_velocity_m_s[0])


def test_mud_settles_slower_than_sand():
    with pytest.raises(OrderError, match=r'"mud" \(0.06 m/s\) no longer settles slower than "sand" \(0.028'):
        changed(({"what": "settling_velocity", "classes": ("mud",), "factors": (300.0,)}, 300.0))
    with pytest.raises(OrderError, match=r'"mud" \(0.0004 m\) no longer is finer than "sand"'):
        changed(({"what": "diameter", "classes": ("mud",), "factors": (20.0,)}, 20.0))


def test_porosity_changes_density_and_keeps_the_grains():
    fraction, median = np.array([[0.3], [0.6], [0.1]])[:, :, None], np.array([[2e-4]])
    classes = class_properties(BED.classes, Water(10.0, 35.0))
    pack = packer("mixture", classes, BED.layers)
    pores, density = pack(fraction, median)
    case = changed(({"what": "porosity", "factors": (1.2,)}, 1.2))
    more, lighter = repacked(pack, case.porosity)(fraction, median)
    assert more == pytest.approx(1.2 * pores)
    # Density of the grains themselves, 2650 kg m-3, is what it was.
    assert lighter / (1.0 - more) == pytest.approx(density / (1.0 - pores))
    assert lighter / (1.0 - more) == pytest.approx(2650.0)
    with pytest.raises(BedError, match=r"porosity × 3 would make .* give smaller factors"):
        changed(({"what": "porosity", "factors": (3.0,)}, 3.0))


def test_the_rim_keeps_its_unit():
    wide = Rim(width_m=3000.0, classes={"sand": 1.0})
    assert changed(({"what": "rim_width", "factors": (0.5,)}, 0.5), rim=wide).rim.width_m == 1500.0
    cells = Rim(width_cells=5, classes={"sand": 1.0})
    assert changed(({"what": "rim_width", "factors": (0.5,)}, 0.5), rim=cells).rim.width_cells == 2
    assert changed(({"what": "rim_width", "values": (9,)}, 9), rim=cells).rim.width_cells == 9


@pytest.mark.parametrize(
    ("vary", "value", "words"),
    [
        ({"what": "settling_velocity", "classes": ("silt",), "factors": (2.0,)}, 2.0, r'no class "silt"; the bed has mud, sand, gravel'),
        ({"what": "erosion_rate", "classes": ("sand",), "factors": (2.0,)}, 2.0, r'erosion_rate of "sand" is not given'),
        ({"what": "thickness", "layers": (3,), "factors": (2.0,)}, 2.0, r"no layer 3; the bed has 2"),
        ({"what": "rim_width", "factors": (2.0,)}, 2.0, r"the recipe has no \[rim\]"),
    ],
)  # fmt: skip
def test_what_is_not_there_cannot_be_changed(vary, value, words):
    with pytest.raises(BedError, match=words):
        changed((vary, value))
