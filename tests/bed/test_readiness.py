from dataclasses import replace

import numpy as np
import pytest

from texture.bed import BedArrays, check_bed


def good(rows=6, columns=7):
    rng = np.random.default_rng(2)
    surface = rng.dirichlet([20.0, 20.0, 20.0], (2, rows, columns))
    fraction = np.ascontiguousarray(np.moveaxis(surface, -1, 0))
    weight = np.zeros((rows, columns))
    weight[-1] = 1.0
    fraction[:, :, -1] = np.array([0.0, 0.6, 0.4])[:, None, None]
    water = np.ones((rows, columns), dtype=bool)
    water[0, :3] = False
    thickness = np.where(water, np.array([0.1, 1.9])[:, None, None], 0.0)
    density = np.full((2, rows, columns), 1500.0)
    return BedArrays(
        names=("mud", "sand", "gravel"),
        class_fraction=fraction,
        water=water,
        erodible_thickness=thickness,
        dry_density=density,
        porosity=np.full((2, rows, columns), 0.43),
        class_mass_content=thickness * density * fraction,
        evidence=np.ones((2, rows, columns), dtype=int),
        rim_weight=weight,
        diameter_m=np.array([20e-6, 250e-6, 8e-3]),
        settling_velocity_m_s=np.array([1e-4, 0.03, 0.4]),
        critical_stress_pa=np.array([0.1, 0.2, 7.0]),
    )


def verdicts(bed, **settings):
    return {check.name: check for check in check_bed(bed, **settings)}


def test_a_good_bed_passes_everything():
    found = verdicts(good())
    assert {c.verdict for c in found.values()} == {"pass"}
    assert found["land"].detail == "filled, with no erodible thickness"
    assert found["thickness"].detail == "2 to 2 m in 2 layers"


def changed(name, where, value):
    bed = good()
    values = getattr(bed, name).copy()
    values[where] = value
    return replace(bed, **{name: values})


def isolated():
    bed = good()
    water = bed.water.copy()
    water[1, 1] = water[0, 1] = water[1, 0] = water[1, 2] = water[2, 1] = False
    water[1, 1] = True
    return replace(bed, water=water)


def front():
    bed = good()
    fraction = bed.class_fraction.copy()
    fraction[:, 0, 2, 2] = [1.0, 0.0, 0.0]
    fraction[:, 0, 2, 3] = [0.0, 0.0, 1.0]
    return replace(bed, class_fraction=fraction, class_mass_content=None)


@pytest.mark.parametrize(
    ("bed", "name", "verdict", "detail"),
    [
        (changed("class_fraction", (0, 1, 3, 2), np.nan), "holes", "fail", "class_fraction: 1 cells, (row, column) (3, 2)"),
        (changed("erodible_thickness", (0, 3, 2), np.nan), "holes", "fail", "erodible_thickness: 1 cells"),
        (changed("class_fraction", (0, 0, 3, 2), 1.2), "fractions in 0 to 1", "fail", "(3, 2)"),
        (changed("class_fraction", (0, 0, 3, 2), 0.0), "sums", "fail", "(3, 2)"),
        (changed("class_mass_content", (0, 0, 3, 2), 0.0), "mass content", "fail", "(3, 2)"),
        (changed("erodible_thickness", (slice(None), 3, 2), 0.01), "thickness", "warn", "less than the 1 m that a run may cut: 1 cells"),
        (changed("erodible_thickness", (0, 3, 2), -0.1), "thickness", "fail", "below 0: 1 cells"),
        (replace(good(), erodible_thickness=None), "thickness", "warn", "does not say"),
        (replace(good(), rim_weight=None), "rim", "warn", "no rim; 19 water cells lie on the outer edge"),
        (changed("class_fraction", (slice(None), 0, -1, 3), [0.2, 0.5, 0.3]), "rim is coarse", "warn", "at most 20 % finer"),
        (changed("class_fraction", (slice(None), slice(None), 0, 1), np.nan), "land", "warn", "1 land cells have no bed"),
        (changed("erodible_thickness", (slice(None), 0, 1), 1.0), "land", "pass", "1 land cells can erode"),
        (isolated(), "isolated water", "warn", "1 cells, (row, column) (1, 1)"),
        (front(), "jumps", "warn", "largest 100 % of the bed between neighbours: 1 cells, (row, column) (2, 3)"),
        (changed("settling_velocity_m_s", 0, np.nan), "settling velocity", "warn", "not given for mud"),
        (changed("critical_stress_pa", 1, 900.0), "critical stress", "fail", "sand 900"),
        (changed("diameter_m", 2, 8.0), "grain diameter", "fail", "gravel 8"),
        (changed("porosity", (0, 3, 2), 0.99), "porosity", "fail", "expected 0.1 to 0.95: 1 cells"),
        (changed("evidence", 0, 2), "support", "warn", "100.0 % of the water cells"),
        (replace(good(), water=None), "water mask", "warn", "taken as land"),
        (replace(good(), water=np.zeros((6, 7), dtype=bool)), "water mask", "fail", "no cell is water"),
    ],
)  # fmt: skip
def test_each_check_sees_its_fault_and_the_place(bed, name, verdict, detail):
    found = verdicts(bed)[name]
    assert found.verdict == verdict
    assert detail in found.detail


def test_single_precision_is_a_warning():
    bed = good()
    rounded = bed.class_fraction.astype(np.float32).astype(float)
    assert verdicts(replace(bed, class_fraction=rounded))["sums"].verdict == "warn"


def test_grains_that_fall_through_a_layer_in_one_step():
    found = verdicts(good(), time_step_s=60.0, water_layer_m=2.0)["fall in a time step"]
    assert (found.verdict, found.detail) == ("warn", "more than the 2 m of water: gravel 24 m")
    assert verdicts(good(), time_step_s=1.0, water_layer_m=2.0)["fall in a time step"].verdict == "pass"
    assert "fall in a time step" not in verdicts(good())


def test_first_layer_against_the_active_layer():
    assert verdicts(good(), active_layer_m=0.1)["first layer"].verdict == "pass"
    found = verdicts(good(), active_layer_m=0.25)["first layer"]
    assert found.verdict == "warn"
    assert "39 cells, (row, column) (0, 3)" in found.detail
    assert verdicts(replace(good(), erodible_thickness=None), active_layer_m=0.1)["first layer"].verdict == "warn"
    assert "first layer" not in verdicts(good())


def flat(bed, pairs=None):
    """The same bed as a list of cells."""
    n = bed.water.size
    values = {
        name: getattr(bed, name).reshape(*getattr(bed, name).shape[:-2], n)
        for name in ("class_fraction", "water", "erodible_thickness", "dry_density", "porosity", "class_mass_content",
                     "evidence", "rim_weight")
    }  # fmt: skip
    return replace(bed, **values, pairs=pairs)


def test_cells_without_rows_and_columns_get_the_same_verdicts():
    for bed in (good(), isolated(), changed("class_fraction", (0, 0, 3, 2), 0.0)):
        grid, mesh, places = verdicts(bed), verdicts(flat(bed, bed.neighbours)), verdicts(flat(bed))
        assert {k: c.verdict for k, c in grid.items()} == {k: c.verdict for k, c in mesh.items()}
        assert set(grid) - set(places) == {"isolated water", "jumps"}
    assert "1 cells, number 23" in verdicts(flat(bed))["sums"].detail
    assert verdicts(flat(replace(good(), rim_weight=np.zeros((6, 7)))))["rim"].verdict == "warn"
