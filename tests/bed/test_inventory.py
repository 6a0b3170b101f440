import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.bed import make_bed
from texture.bed.inventory import depth_groups, mean_correlation, take_stock
from texture.recipe import Bed, Inventory, Rim

from .conftest import make_target
from .test_mobility import CLASSES

DEPTH = np.array([[5.0, 10.0, np.nan, -1.0, 30.0, 300.0]] * 3)


def independent(a, b):
    return (a == b).astype(float)


def together(a, b):
    return np.ones(a.size)


def stock_of(alike, rim=None, layers=({"thickness_m": 0.5},), quantiles=True, target=None):
    target = target or make_target(np.ones((3, 6)), depth_m=DEPTH.ravel())
    n = target.n_cells
    fractions = np.tile([0.5, 0.4, 0.1], (n, 1))
    spread = np.array([[0.2, 0.1, 0.05], [0.0, 0.0, 0.0], [-0.3, -0.2, -0.1]])[:, None, :]
    limits = fractions - spread if quantiles else np.full((3, n, 3), np.nan)
    settings = Bed(classes=CLASSES, layers=layers, least_fraction=0.0)
    bed = make_bed(fractions, np.ones(n), target, settings, rim)
    groups = depth_groups(target.active, target.depth_m, (10.0, 20.0, 50.0))
    return take_stock(bed, settings, target, fractions, limits, groups, alike), bed, target


def test_tonnes_by_hand():
    stocks, bed, target = stock_of(together)
    by_key = {(s.zone, s.depth_from_m if s.depth_from_m == s.depth_from_m else None, s.sediment): s for s in stocks}
    mud = next(s for s in stocks if s.sediment == "mud")
    # 18 cells of 100 m × 100 m, half a metre: mud 0.5 of the dry density
    tonnes = target.area_m2.sum() * 0.5 * bed.dry_density[0, 0] * 0.5 / 1000.0
    assert mud.tonnes == pytest.approx(tonnes, rel=1e-9)
    # All cells low at once: 0.3 of the dry mass instead of 0.5, and 0.8 at most
    assert mud.tonnes_low == pytest.approx(tonnes * 0.6, rel=1e-9)
    assert mud.tonnes_high == pytest.approx(tonnes * 1.6, rel=1e-9)
    assert by_key["all", 10.0, "mud"].cells == 3  # 10 m itself; the shallower and the tidal flat lie above
    assert by_key["all", 50.0, "mud"].cells == 3
    assert by_key["depth not known", None, "mud"].cells == 3
    for name, total in bed.account.tonnes.items():
        bands = [s.tonnes for s in stocks[3:] if s.sediment == name]
        assert sum(bands) == pytest.approx(total, rel=1e-12)


def test_the_range_shrinks_with_the_root_of_independent_cells():
    wide, narrow = stock_of(together)[0][0], stock_of(independent)[0][0]
    assert wide.tonnes == narrow.tonnes
    assert (narrow.tonnes_high - narrow.tonnes) / (wide.tonnes_high - wide.tonnes) == pytest.approx(18**-0.5, rel=1e-3)


def test_what_was_not_mapped_has_no_range():
    layers = ({"thickness_m": 0.5}, {"thickness_m": 2.0, "fill": {"mud": 1.0}})
    stocks, bed, target = stock_of(together, layers=layers)
    given_below = target.area_m2.sum() * 2.0 * bed.dry_density[1, 0] / 1000.0
    assert stocks[0].tonnes_low > given_below
    rim = Rim(sides=("west",), width_cells=1, classes={"sand": 1.0})
    plain, rimmed = stock_of(together)[0], stock_of(together, rim)[0]
    spread = [s.tonnes_high - s.tonnes for s in (plain[0], rimmed[0])]
    assert spread[1] == pytest.approx(spread[0] * 15 / 18, rel=1e-3)


def test_a_method_without_variance_has_no_range():
    stocks = stock_of(together, quantiles=False)[0]
    assert np.isnan([s.tonnes_low for s in stocks]).all()
    assert all(s.tonnes > 0.0 for s in stocks)


def test_without_depth_all_cells_are_one_group():
    stocks = stock_of(together, target=make_target(np.ones((2, 2))))[0]
    assert [(s.zone, s.sediment) for s in stocks] == [("all", "mud"), ("all", "sand"), ("all", "gravel")]


@given(st.integers(65, 400), st.integers(0, 99))
def test_drawn_pairs_agree_with_all_pairs(count, seed):
    rng = np.random.default_rng(seed)
    place, weights = rng.uniform(0, 1, count), rng.exponential(1.0, count)

    def alike(a, b):
        return np.exp(-3.0 * np.abs(place[a] - place[b]))

    exact = np.einsum("i,j,ij->", weights, weights, alike(*np.indices((count, count)))) / weights.sum() ** 2
    assert mean_correlation(np.arange(count), weights, alike, seed) == pytest.approx(exact, abs=0.025)


def test_the_same_law_as_a_normal_sum():
    """Outside check: the spread of a sum of correlated normals, drawn with numpy's own generator."""
    rng = np.random.default_rng(3)
    place, sd = rng.uniform(0, 1, 40), rng.uniform(0.5, 2.0, 40)
    rho = np.exp(-2.0 * np.abs(place[:, None] - place))
    drawn = rng.multivariate_normal(np.zeros(40), rho * np.outer(sd, sd), 40_000).sum(axis=1)
    factor = np.sqrt(mean_correlation(np.arange(40), sd, lambda a, b: rho[a, b]))
    assert factor * sd.sum() == pytest.approx(drawn.std(), rel=0.02)


def test_bands_in_no_order():
    with pytest.raises(ValueError, match=r"depth_bands_m: expected limits from shallow to deep, found \[20.0, 10.0\]"):
        Inventory(depth_bands_m=(20.0, 10.0))
