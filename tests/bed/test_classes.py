import numpy as np
import pytest

from texture.bed import Water, class_properties, critical_stress, settling_velocity
from texture.errors import BedError
from texture.recipe import BedClass


def test_sand_is_computed_mud_is_not():
    water = Water()
    found = class_properties(
        [
            BedClass(name="silt", part="mud", grain={"diameter_m": 63e-6}),
            BedClass(name="fine", part="sand", share=0.4, grain={"diameter_m": 64e-6, "density_kg_m3": 2700.0}),
        ],
        water,
    )
    assert found.part.tolist() == [0, 1]
    assert np.isnan(found.settling_velocity_m_s[0])
    assert found.settling_velocity_m_s[1] == settling_velocity(64e-6, water, density=2700.0)
    assert found.critical_stress_pa[1] == critical_stress(64e-6, water, density=2700.0)
    assert found.settling_source == ("not given", "computed")
    assert found.not_given == (
        "silt: settling velocity",
        "silt: critical stress",
        "silt: erosion rate",
        "fine: erosion rate",
    )


def test_given_values_go_before_computed_ones_and_flocs_are_never_computed():
    found = class_properties(
        [
            BedClass(name="flocs", part="mud", kind="floc", grain={"diameter_m": 2e-4}),
            BedClass(
                name="sand",
                part="sand",
                grain={"diameter_m": 2e-4},
                water_column={"settling_velocity_m_s": 0.03},
                erosion={"critical_stress_pa": 0.5, "rate": 1e-4, "form": "excess_stress"},
            ),
        ],
        Water(),
    )
    assert found.stress_source == ("not given", "given")
    assert (found.settling_velocity_m_s[1], found.critical_stress_pa[1]) == (0.03, 0.5)
    assert (found.erosion_rate[1], found.form[1]) == (1e-4, "excess_stress")


@pytest.mark.parametrize(
    ("grain", "message"),
    [
        ({}, 'bed.classes "odd": grain.diameter_m is missing'),
        ({"diameter_m": 250.0}, 'bed.classes "odd": grain diameter 250 m.*metres'),
        ({"diameter_m": 1e-3, "density_kg_m3": 1020.0}, 'bed.classes "odd": grain density 1020 kg m-3 is not above'),
    ],
)
def test_impossible_grains_name_their_class(grain, message):
    with pytest.raises(BedError, match=message):
        class_properties([BedClass(name="odd", part="sand", grain=grain)], Water())
