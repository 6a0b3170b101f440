"""Published values for water, grains and waves.

Numbers marked `from memory` are handbook values kept to the digits given; the others were computed from
the cited formula with independent code.
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.bed import (
    Water,
    critical_stress,
    dry_density,
    porosity,
    settling_velocity,
    skin_roughness_length,
    wave_current_stress,
    wave_stress,
)
from texture.bed.grain import dimensionless_diameter
from texture.bed.orbital import orbital_velocity, rms_orbital_velocity, wave_number
from texture.bed.settling import rouse_number
from texture.bed.threshold import critical_shields
from texture.bed.waves import current_stress, friction_factor, rough_friction_factor, smooth_friction_factor
from texture.errors import BedError

# The water that Soulsby (1997) tabulates for: sea water of 10 °C and salinity 35.
BOOK_WATER = Water(density=1027.0, kinematic_viscosity=1.36e-6)


class TestWater:
    @pytest.mark.parametrize(
        ("salinity", "temperature", "density"),
        [(0.0, 5.0, 999.96675), (0.0, 25.0, 997.04796), (35.0, 5.0, 1027.67547), (35.0, 25.0, 1023.34306)],
    )
    def test_density_check_values_of_unesco_1983(self, salinity, temperature, density):
        assert Water(temperature, salinity).density == pytest.approx(density, abs=1e-5)

    @pytest.mark.parametrize(
        ("salinity", "temperature", "viscosity"),
        [(0.0, 10.0, 1.30640), (35.0, 10.0, 1.36011), (0.0, 20.0, 1.00356), (35.0, 20.0, 1.05061)],
    )
    def test_viscosity_of_sharqawy_2010_over_eos80(self, salinity, temperature, viscosity):
        assert Water(temperature, salinity).kinematic_viscosity == pytest.approx(viscosity * 1e-6, rel=1e-4)

    def test_viscosity_agrees_with_the_value_soulsby_1997_uses(self):
        assert Water(10.0, 35.0).kinematic_viscosity == pytest.approx(1.36e-6, rel=0.01)

    def test_a_given_density_changes_the_computed_viscosity_not_itself(self):
        water = Water(density=1030.0)
        assert water.density == 1030.0
        assert water.kinematic_viscosity == pytest.approx(
            Water().kinematic_viscosity * Water().density / 1030.0, rel=1e-12
        )

    @pytest.mark.parametrize(
        ("settings", "message"),
        [
            ({"temperature_c": 60.0}, "temperature_c = 60, expected -2 to 40 °C"),
            ({"salinity": float("nan")}, "salinity = nan"),
            ({"density": 1.027}, "density = 1.027, expected 900 to 1300 kg m-3"),
            ({"kinematic_viscosity": 1.36}, "kinematic_viscosity = 1.36"),
        ],
    )
    def test_what_is_no_water_is_refused(self, settings, message):
        with pytest.raises(BedError, match=message):
            Water(**settings)


# Soulsby & Whitehouse (1997), quartz 2650 in BOOK_WATER: d mm, D*, critical Shields, critical stress Pa.
THRESHOLDS = [
    (0.0625, 1.26958, 0.120262, 0.11967),
    (0.1, 2.03133, 0.089460, 0.14244),
    (0.125, 2.53916, 0.076853, 0.15295),
    (0.2, 4.06265, 0.055354, 0.17627),
    (0.25, 5.07832, 0.047601, 0.18947),
    (0.5, 10.15663, 0.032859, 0.26158),
    (1.0, 20.31327, 0.030185, 0.48059),
    (2.0, 40.62653, 0.036625, 1.16625),
    (10.0, 203.13266, 0.055280, 8.80140),
]


class TestThreshold:
    @pytest.mark.parametrize(("mm", "size", "shields", "stress"), THRESHOLDS)
    def test_soulsby_whitehouse_1997(self, mm, size, shields, stress):
        assert dimensionless_diameter(mm * 1e-3, BOOK_WATER) == pytest.approx(size, rel=1e-4)
        assert critical_shields(size) == pytest.approx(shields, rel=1e-4)
        assert critical_stress(mm * 1e-3, BOOK_WATER) == pytest.approx(stress, rel=1e-4)

    def test_limits_and_smallest_value_of_the_shields_curve(self):
        assert critical_shields(1e-9) == pytest.approx(0.30, rel=1e-6)
        assert critical_shields(1e6) == pytest.approx(0.055, rel=1e-4)
        size = np.linspace(5.0, 50.0, 45001)
        lowest = critical_shields(size).argmin()
        assert size[lowest] == pytest.approx(17.04, abs=0.01)
        assert critical_shields(size[lowest]) == pytest.approx(0.029871, abs=1e-6)

    @pytest.mark.parametrize(
        ("mm", "stress"),
        [
            (64, 53.8), (32, 25.9), (16, 12.2), (8, 5.7), (4, 2.7), (2, 1.3), (1, 0.47), (0.5, 0.27), (0.25, 0.194),
            (0.125, 0.145), (0.0625, 0.110), (0.031, 0.0826), (0.0156, 0.0630), (0.0078, 0.0378),
        ],
    )  # fmt: skip
    def test_within_thirty_percent_of_the_handbook_table_of_julien_1998(self, mm, stress):
        fresh = Water(density=998.2, kinematic_viscosity=1.004e-6)  # 20 °C; the table from memory
        assert critical_stress(mm * 1e-3, fresh) == pytest.approx(stress, rel=0.3)

    @given(st.floats(1e-6, 0.5))
    def test_heavier_grains_of_a_size_need_more(self, diameter):
        assert critical_stress(diameter, BOOK_WATER, 3000.0) > critical_stress(diameter, BOOK_WATER, 2650.0)

    def test_unknown_sizes_stay_unknown(self):
        assert np.isnan(critical_stress([np.nan, 1e-3], BOOK_WATER)).tolist() == [True, False]

    def test_millimetres_and_floating_grains_are_refused(self):
        with pytest.raises(BedError, match="diameters are in metres"):
            critical_stress([1e-3, 8.0], BOOK_WATER)
        with pytest.raises(BedError, match="would not settle"):
            critical_stress(1e-3, BOOK_WATER, density=1000.0)


# d mm: Soulsby (1997), Ferguson & Church (2004) natural grains, m/s in BOOK_WATER.
SETTLING = [
    (0.01, 5.7711e-5, 6.3052e-5),
    (0.0625, 2.2432e-3, 2.3145e-3),
    (0.1, 5.6576e-3, 5.5587e-3),
    (0.2, 2.01912e-2, 1.81723e-2),
    (0.5, 6.62952e-2, 6.19096e-2),
    (1.0, 0.114212, 0.117172),
    (2.0, 0.173441, 0.188219),
]


class TestSettling:
    @pytest.mark.parametrize(("mm", "soulsby", "ferguson_church"), SETTLING)
    def test_soulsby_1997_and_ferguson_church_2004(self, mm, soulsby, ferguson_church):
        assert settling_velocity(mm * 1e-3, BOOK_WATER) == pytest.approx(soulsby, rel=1e-4)
        church = settling_velocity(mm * 1e-3, BOOK_WATER, method="ferguson_church")
        assert church == pytest.approx(ferguson_church, rel=1e-4)
        assert church == pytest.approx(soulsby, rel=0.15)

    def test_both_near_stokes_law_for_very_fine_grains(self):
        d = 1e-6
        stokes = 9.81 * (2650.0 / 1027.0 - 1.0) * d**2 / (18.0 * 1.36e-6)
        assert settling_velocity(d, BOOK_WATER, "ferguson_church") == pytest.approx(stokes, rel=1e-3)
        # Soulsby's constants give 1.049 / (2 · 10.36) instead of 1 / 18
        assert settling_velocity(d, BOOK_WATER) == pytest.approx(stokes * 18.0 * 1.049 / 20.72, rel=1e-3)

    @given(st.floats(1e-7, 0.9), st.floats(1.001, 1.09))
    def test_larger_grains_sink_faster(self, diameter, factor):
        for method in ("soulsby", "ferguson_church"):
            slow, fast = settling_velocity([diameter, diameter * factor], BOOK_WATER, method)
            assert slow < fast

    def test_unknown_method_names_the_known_ones(self):
        with pytest.raises(BedError, match='unknown method "stokes"; known: soulsby, ferguson_church'):
            settling_velocity(1e-4, BOOK_WATER, method="stokes")

    def test_rouse_number_by_hand(self):
        assert rouse_number([0.02, 0.001], [0.05, 0.02]) == pytest.approx([1.0, 0.125], abs=1e-9)
        assert rouse_number(0.02, 0.0) == np.inf


class TestWaves:
    def test_smooth_friction_factor_of_soulsby_1997(self):
        found = smooth_friction_factor([1e4, 1e5, 5e5, 5.0001e5, 1e6, 1e7])
        assert found == pytest.approx([0.02, 0.006325, 0.002828, 0.004478, 0.003934, 0.002558], abs=1e-6)

    def test_rough_friction_factor_of_soulsby_1997(self):
        # A / ks of 10, 100 and 1000 with ks = 30 z0
        found = rough_friction_factor(30.0 * np.array([10.0, 100.0, 1000.0]))
        assert found == pytest.approx([0.071600, 0.021623, 0.006530], abs=1e-5)

    def test_example_5_1_of_soulsby_1997(self):
        excursion = 0.5 * 12.6 / (2 * np.pi)
        assert excursion == pytest.approx(1.002676, abs=1e-5)
        factor = friction_factor(0.5, 12.6, 0.001, BOOK_WATER)
        assert factor == pytest.approx(0.0382306, abs=1e-6)
        # the same bed as grains: z0 = d50 / 12
        waves = wave_stress(0.5, 12.6, 0.012, BOOK_WATER)
        assert waves == pytest.approx(4.907855, abs=1e-5)
        current = current_stress(1.0, 10.0, 0.001, BOOK_WATER)
        assert current == pytest.approx(2.437632, abs=1e-5)
        angles = np.array([30.0, 0.0, 45.0, 90.0, 210.0])
        mean, largest = wave_current_stress(current, waves, angles)
        assert mean == pytest.approx(3.242523, abs=1e-5)
        assert largest == pytest.approx([7.884450, 8.150377, 7.556887, 5.882261, 7.884450], abs=1e-5)

    def test_limits_of_waves_and_current_together(self):
        mean, largest = wave_current_stress([1.5, 0.0, 0.0], [0.0, 2.0, 0.0], 20.0)
        assert mean.tolist() == [1.5, 0.0, 0.0]
        assert largest == pytest.approx([1.5, 2.0, 0.0])

    @given(st.floats(0, 50), st.floats(0, 50), st.floats(-360, 360))
    def test_waves_never_lower_the_stress(self, current, wave, angle):
        mean, largest = wave_current_stress(current, wave, angle)
        assert mean >= current
        assert largest >= max(mean, wave) * (1 - 1e-12)

    def test_orders_of_magnitude_of_fair_weather_and_storm(self):
        # common practice, no source: tenths of a pascal in fair weather, tens in a storm
        fair = wave_stress([0.1, 0.2], 8.0, 0.2e-3, BOOK_WATER)
        assert fair == pytest.approx([0.106, 0.212], abs=0.005)
        storm = wave_stress(3.0, 12.0, [0.2e-3, 1e-3], BOOK_WATER)
        assert storm == pytest.approx([11.3, 20.0], rel=0.05)

    def test_still_water_and_unknown_cells(self):
        assert wave_stress([0.0, np.nan], 8.0, 0.2e-3, BOOK_WATER).tolist()[0] == 0.0
        assert np.isnan(wave_stress([0.0, np.nan], 8.0, 0.2e-3, BOOK_WATER)[1])

    @pytest.mark.parametrize(
        ("call", "message"),
        [
            (lambda: wave_stress(-0.1, 8.0, 2e-4, BOOK_WATER), "orbital velocity -0.1 m s-1, expected 0 or more"),
            (lambda: wave_stress(0.1, 0.0, 2e-4, BOOK_WATER), "wave period 0 s"),
            (lambda: wave_current_stress(-1.0, 0.0, 0.0), "current stress -1 Pa"),
            (lambda: current_stress(1.0, 0.001, 0.001, BOOK_WATER), "30 roughness lengths"),
        ],
    )
    def test_out_of_range(self, call, message):
        with pytest.raises(BedError, match=message):
            call()


class TestOrbital:
    def test_wavelength_table_c1_of_the_shore_protection_manual(self):
        relative = np.array([0.05, 0.1, 0.2, 0.5])  # h / L0
        period = 8.0
        deep_length = 9.81 * period**2 / (2 * np.pi)
        depth = relative * deep_length
        kh = wave_number(period, depth) * depth
        assert kh / (2 * np.pi) == pytest.approx([0.09415, 0.14098, 0.22512, 0.50183], abs=1e-5)
        assert np.tanh(kh) == pytest.approx([0.53104, 0.70932, 0.88843, 0.99636], abs=1e-5)

    def test_velocity_at_the_bed_under_linear_waves(self):
        found = orbital_velocity([1.0, 2.0, 5.0, 6.0], [6.0, 8.0, 12.0, 14.0], [10.0, 20.0, 15.0, 50.0])
        assert found == pytest.approx([0.3090047, 0.4054040, 1.7361535, 0.8689771], abs=1e-5)

    def test_no_motion_far_below_short_waves(self):
        assert orbital_velocity(2.0, 3.0, 5000.0) == 0.0

    def test_soulsby_2006_rms_velocity(self):
        found = rms_orbital_velocity([1, 3, 3, 6], [5, 8, 8, 10], [10, 20, 50, 30])
        assert found == pytest.approx([0.14837, 0.35261, 0.11634, 0.58508], abs=1e-4)

    def test_a_dry_cell_is_refused(self):
        with pytest.raises(BedError, match="depth 0 m, expected above 0"):
            wave_number(8.0, [10.0, 0.0])

    @given(st.floats(0.5, 30.0), st.floats(0.01, 8000.0))
    def test_the_dispersion_relation_holds(self, period, depth):
        k = wave_number(period, depth)
        assert 9.81 * k * np.tanh(k * depth) == pytest.approx((2 * np.pi / period) ** 2, rel=1e-12)


class TestPacking:
    def test_wu_wang_2006(self):
        found = porosity(np.array([0.004, 0.0625, 0.125, 0.2, 0.25, 0.5, 1.0]) * 1e-3)
        assert found == pytest.approx([0.7449, 0.5034, 0.4539, 0.4238, 0.4105, 0.3727, 0.3399], abs=1e-4)

    def test_komura_1963(self):
        found = porosity(np.array([0.0625, 0.125, 0.25, 0.5, 1.0]) * 1e-3, method="komura")
        assert found == pytest.approx([0.4958, 0.4619, 0.4325, 0.4071, 0.3851], abs=1e-4)

    @given(st.floats(1e-6, 0.5), st.floats(1.01, 1.9), st.sampled_from(["wu_wang", "komura"]))
    def test_between_zero_and_one_and_falling_with_size(self, diameter, factor, method):
        fine, coarse = porosity([diameter, diameter * factor], method)
        assert 0.0 < coarse < fine < 1.0

    def test_dry_density_by_hand(self):
        assert dry_density([0.4, 0.7], 2650.0) == pytest.approx([1590.0, 795.0])

    def test_refusals(self):
        with pytest.raises(BedError, match='unknown method "colby"'):
            porosity(1e-3, method="colby")
        with pytest.raises(BedError, match="at least 1e-06 m"):
            porosity(1e-8)
        with pytest.raises(BedError, match="porosity outside 0 to 1"):
            dry_density(1.2, 2650.0)


def test_skin_roughness_of_soulsby_1997():
    assert skin_roughness_length([0.2e-3, np.nan])[0] == pytest.approx(0.2e-3 * 2.5 / 30.0, rel=1e-15)
    with pytest.raises(BedError, match="expected above 0"):
        skin_roughness_length(0.0)
