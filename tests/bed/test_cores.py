"""Layers from cores, as arrays: the map moved in log-ratio coordinates."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.bed import CoreLayer, make_bed
from texture.bed.cores import moved_fractions, surface_coordinates
from texture.composition import LogRatio
from texture.errors import BedError
from texture.recipe import Bed

TREE = LogRatio(("mud", "sand", "gravel"), detection_limit=0.005)
LAYERS = [{"thickness_m": 0.1}, {"thickness_m": 0.3, "fill": "cores"}]


def test_a_layer_by_hand():
    """Odds of mud of 1 become odds of 1/4, and gravel's share of the rest stays 1/5."""
    moved = moved_fractions(np.array([[0.5, 0.4, 0.1]]), np.array([[np.log(0.25), 0.0]]), TREE)
    np.testing.assert_allclose(moved, [[0.2, 0.64, 0.16]], rtol=1e-12)


def test_nothing_moves_without_a_shift():
    fractions = np.array([[0.5, 0.4, 0.1], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.7, 0.299, 0.001]])
    for kind in ("tree", "ilr", "alr", "shares"):
        logratio = LogRatio(("mud", "sand", "gravel"), kind=kind, detection_limit=0.005)
        np.testing.assert_array_equal(moved_fractions(fractions, np.zeros((4, 2)), logratio), fractions)


def test_what_a_core_found_under_pure_mud():
    """The difference is taken from the same coordinates that are moved, so that the layer is what was found."""
    surface, core = np.array([[1.0, 0.0, 0.0]]), np.array([[0.2, 0.6, 0.2]])
    shift = TREE.forward(core) - surface_coordinates(surface, TREE)
    np.testing.assert_allclose(
        moved_fractions(surface, shift, TREE), core, atol=0.005
    )  # the limit, of what was replaced


@given(st.integers(0, 2**32 - 1), st.sampled_from(["tree", "ilr", "alr", "shares"]))
def test_fractions_stay_fractions(seed, kind):
    rng = np.random.default_rng(seed)
    fractions = rng.dirichlet([0.2, 0.2, 0.2], 50)
    logratio = LogRatio(("mud", "sand", "gravel"), kind=kind, detection_limit=0.02)
    moved = moved_fractions(fractions, rng.normal(0.0, 5.0, (50, 2)), logratio)
    assert (moved >= 0.0).all()
    np.testing.assert_allclose(moved.sum(axis=1), 1.0, atol=1e-12)


def test_a_bed_with_a_layer_from_cores(target_of):
    """Three cells of water, a core reaches the first: mass below samples is that of the other two, by hand."""
    target = target_of(np.array([[True, True, True, False]]))
    shift = np.zeros((4, 2))
    shift[0, 0] = np.log(0.25)
    core = CoreLayer(TREE, shift, np.array([True, False, False, False]), 1, 0.5)
    fractions = np.tile([0.5, 0.4, 0.1], (4, 1))
    bed = make_bed(fractions, np.ones(4), target, Bed(layers=LAYERS, least_fraction=0.0), cores={1: core})
    np.testing.assert_allclose(bed.class_fraction[:, 1, 0], [0.2, 0.64, 0.16])
    np.testing.assert_array_equal(bed.class_fraction[:, 1, 1], bed.class_fraction[:, 0, 1])
    np.testing.assert_allclose(bed.class_fraction.sum(axis=0), 1.0, atol=1e-12)
    assert bed.evidence.tolist() == [[1, 1, 1, 4], [1, 2, 2, 4]]
    mass = bed.class_mass_content.sum(axis=0)[:, :3]
    assert bed.account.share_below_samples == pytest.approx(mass[1, 1:].sum() / mass.sum())
    with pytest.raises(BedError, match=r"bed.layers\[1\].fill = \"cores\": what the cores found has to be given"):
        make_bed(fractions, np.ones(4), target, Bed(layers=LAYERS))
