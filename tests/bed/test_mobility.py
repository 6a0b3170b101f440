from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.bed import Condition, Water, make_bed, moved_by, wave_stress
from texture.bed.mobility import equivalent_amplitude, skin_stress
from texture.bed.waves import current_stress, wave_current_stress
from texture.errors import BedError
from texture.recipe import Bed, Mobility, Rim

from .conftest import make_target

WATER = Water()
CLASSES = [
    {"name": "mud", "part": "mud", "grain": {"diameter_m": 20e-6}, "erosion": {"critical_stress_pa": 0.05}},
    {"name": "sand", "part": "sand", "grain": {"diameter_m": 250e-6}},
    {"name": "gravel", "part": "gravel", "grain": {"diameter_m": 8e-3}},
]
MUD_LEFT = np.array([[1, 1, 1, 1, 1, 1], [1, 1, 1, 1, 1, 1], [1, 1, 1, 0, 0, 1]])


def half_mud(target, left=(0.8, 0.2, 0.0), right=(0.0, 0.9, 0.1)):
    west = np.arange(target.n_cells) % target.shape[1] < 3
    return np.where(west[:, None], left, right).astype(float), target.active.astype(int)


def condition(target, velocity=0.0, kind="rms", period=8.0, current=0.0, depth=20.0, **more):
    n = target.n_cells

    def full(value):
        return np.broadcast_to(np.asarray(value, dtype=float), (n,)).copy()

    return Condition("a day", full(velocity), full(period), kind, full(current), full(depth), **more)


def test_shares_by_hand():
    target = make_target(MUD_LEFT)
    bed = make_bed(*half_mud(target), target, Bed(classes=CLASSES, least_fraction=0.0))
    moved = moved_by(condition(target, 0.2), bed, target, WATER)
    d = bed.mixture_median_diameter[0]
    expected = wave_stress(0.2 * np.sqrt(2.0), 8.0, d, WATER)
    wet = target.active
    np.testing.assert_allclose(moved.stress_pa[wet], expected[wet], rtol=1e-12)
    assert np.isnan(moved.stress_pa[~wet]).all()
    # 16 water cells of one size: 9 on the muddy left, 7 on the right. All stresses lie between 0.19 and 6.9 Pa.
    assert moved.moving_share["mud"] == pytest.approx(9 / 16, rel=1e-3)
    assert moved.moving_share["sand"] == pytest.approx(1.0, rel=1e-9)
    assert moved.moving_share["gravel"] == 0.0
    assert moved.unknown_share == 0.0
    assert np.isnan(moved.rim_share)
    assert np.isnan(moved.flushed_share)
    assert moved.largest_pa == pytest.approx(np.nanmax(moved.stress_pa))


def test_kinds_of_velocity():
    """The same number taken for another kind: stress goes with u^1.48 over a rough bed, 2^1.48 = 2.8 (Soulsby 1997)."""
    target = make_target(np.ones((3, 3)))
    sand = np.full(9, 1e-3)
    rms, significant, peak = (
        skin_stress(condition(target, 1.0, kind), sand, sand / 12, WATER, target.active)[0]
        for kind in ("rms", "significant", "peak")
    )
    assert rms / significant == pytest.approx(2.0**1.48, rel=1e-6)
    assert significant < peak < rms
    with pytest.raises(BedError, match='unknown kind "mean"; known: rms, significant, peak'):
        equivalent_amplitude(1.0, "mean")


@pytest.mark.parametrize(
    ("velocity", "period", "diameter", "low", "high"),
    [(0.1, 8.0, 0.2e-3, 0.05, 0.5), (0.2, 8.0, 0.2e-3, 0.1, 0.5), (3.0, 12.0, 0.2e-3, 10.0, 50.0), (3.0, 12.0, 1e-3, 10.0, 50.0)],
)  # fmt: skip
def test_orders_of_magnitude(velocity, period, diameter, low, high):
    """Fair weather 0.1 to 0.5 Pa, around the threshold of fine sand; storms tens of Pa: common practice, no source."""
    target = make_target(np.ones((3, 3)))
    d = np.full(9, diameter)
    stress = skin_stress(condition(target, velocity, "peak", period), d, d / 12, WATER, target.active)
    assert (stress > low).all()
    assert (stress < high).all()


def test_waves_and_current_together():
    target = make_target(np.ones((3, 3)))
    d = np.full(9, 250e-6)
    both = condition(target, 0.3, "peak", current=0.5, depth=10.0, angle_deg=90.0)
    waves = wave_stress(0.3, 8.0, 250e-6, WATER)
    current = current_stress(0.5, 10.0, 250e-6 / 12, WATER)
    expected = wave_current_stress(current, waves, 90.0)[1]
    np.testing.assert_allclose(skin_stress(both, d, d / 12, WATER, target.active), expected, rtol=1e-12)
    alone = condition(target, current=0.5, depth=10.0, period=np.nan)
    np.testing.assert_allclose(skin_stress(alone, d, d / 12, WATER, target.active), current, rtol=1e-12)


def test_missing_values_and_drying_flats_are_counted_apart():
    target = make_target(np.ones((2, 5)))
    bed = make_bed(*half_mud(target, right=(0.8, 0.2, 0.0)), target, Bed(classes=CLASSES))
    depth = np.full(10, 5.0)
    depth[:2] = [0.0, -1.0]  # dry, or above the datum: no current there
    velocity = np.full(10, 0.2)
    velocity[4] = np.nan
    moved = moved_by(condition(target, velocity, current=0.3, depth=depth), bed, target, WATER)
    assert np.flatnonzero(np.isnan(moved.stress_pa)).tolist() == [0, 1, 4]
    assert moved.unknown_share == pytest.approx(0.3, rel=1e-3)
    assert moved.moving_share["mud"] == pytest.approx(0.7, rel=1e-3)


def test_mud_that_fair_weather_would_flush():
    target = make_target(MUD_LEFT)
    bed = make_bed(*half_mud(target), target, Bed(classes=CLASSES))
    calm = moved_by(condition(target, 0.03, fair_weather=True), bed, target, WATER)
    assert (calm.flushed_share, calm.flushed.any()) == (0.0, False)
    rough = moved_by(condition(target, 0.3, fair_weather=True), bed, target, WATER)
    ratio = rough.stress_pa[0] / 0.05
    assert ratio > 3.0
    np.testing.assert_array_equal(rough.flushed, target.active & (np.arange(18) % 6 < 3))
    assert rough.flushed_share == pytest.approx(9 / 16, rel=1e-3)
    held = moved_by(condition(target, 0.3, fair_weather=True, flush_ratio=ratio * 1.01), bed, target, WATER)
    assert held.flushed_share == 0.0


def test_strength_that_nobody_gave_is_not_guessed():
    target = make_target(MUD_LEFT)
    weak = [CLASSES[0] | {"erosion": {}}, *CLASSES[1:]]
    bed = make_bed(*half_mud(target), target, Bed(classes=weak))
    moved = moved_by(condition(target, 0.5, fair_weather=True), bed, target, WATER)
    assert np.isnan(moved.moving_share["mud"])
    assert np.isnan(moved.flushed_share)
    assert moved.moving_share["sand"] > 0.9


def test_a_rim_that_a_storm_erodes():
    target = make_target(MUD_LEFT)
    rim = Rim(sides=("west",), width_cells=2, classes={"sand": 1.0})
    bed = make_bed(*half_mud(target), target, Bed(classes=CLASSES), rim)
    assert moved_by(condition(target, 1.0), bed, target, WATER).rim_share == 1.0
    coarse = make_bed(
        *half_mud(target), target, Bed(classes=CLASSES), rim.model_copy(update={"classes": {"gravel": 1.0}})
    )
    assert moved_by(condition(target, 0.2), coarse, target, WATER).rim_share == 0.0


@given(st.floats(0.01, 3.0), st.floats(1.01, 3.0), st.floats(3.0, 20.0))
def test_more_waves_move_more(velocity, more, period):
    target = make_target(MUD_LEFT)
    bed = make_bed(*half_mud(target), target, Bed(classes=CLASSES))
    low, high = (moved_by(condition(target, v, period=period), bed, target, WATER) for v in (velocity, velocity * more))
    for name in low.moving_share:
        assert high.moving_share[name] >= low.moving_share[name]


@pytest.mark.parametrize(
    ("block", "message"),
    [
        ({"orbital_velocity_m_s": 0.2, "period_s": 8.0}, '"a": kind is missing; say whether the velocity is "rms"'),
        ({"orbital_velocity_m_s": 0.2, "kind": "rms"}, "give orbital_velocity_m_s and period_s together"),
        ({}, "has neither waves nor a current"),
        ({"current_m_s": 0.2, "flush_ratio": 2.0}, "flush_ratio acts with fair_weather = true only"),
        ({"current_m_s": "speed"}, 'current_m_s = "speed" names a variable, but file is missing'),
        ({"current_m_s": -0.2}, "greater than or equal to 0"),
    ],
)
def test_conditions_that_do_not_fit(block, message):
    with pytest.raises(ValueError, match=message):
        Mobility(name="a", **block)


def test_a_series_is_averaged_over_its_times():
    target = make_target(MUD_LEFT)
    bed = make_bed(*half_mud(target), target, Bed(classes=CLASSES))
    calm, rough = (moved_by(condition(target, v, hours=10.0), bed, target, WATER) for v in (0.01, 0.3))
    both = condition(target, 0.0, hours=10.0)
    series = np.stack([np.full(18, v) for v in (0.01, 0.3, 0.3, 0.01)])
    found = moved_by(replace(both, orbital_velocity_m_s=series), bed, target, WATER)
    for name in ("mud", "sand", "gravel"):
        assert found.moving_share[name] == pytest.approx((calm.moving_share[name] + rough.moving_share[name]) / 2)
    np.testing.assert_array_equal(found.stress_pa, rough.stress_pa)
    # Mud lies on the left alone and moves there at two of four times: five of ten hours, whatever the rest of the area.
    assert found.moving_hours["mud"] == pytest.approx(5.0)
    assert rough.moving_hours["sand"] == pytest.approx(10.0)
    assert np.isnan(moved_by(condition(target, 0.3), bed, target, WATER).moving_hours["mud"])
