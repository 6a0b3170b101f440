"""The rule of one standard error, and what cannot be told apart."""

import numpy as np
import pytest

from texture.validation.choice import cannot_be_told_apart, rank_methods
from texture.validation.resampling import block_weights


def energies(*excess, n=400, seed=0):
    rng = np.random.default_rng(seed)
    base = rng.uniform(0.1, 0.3, n)
    return np.stack([base + e + 0.05 * rng.standard_normal(n) for e in excess])


def test_the_simplest_within_one_standard_error_is_taken():
    # The forest is better by 0.001 on average, with a standard error of 0.051 / sqrt(400) = 0.00255.
    kriging = np.random.default_rng(0).uniform(0.1, 0.3, 400)
    forest = kriging + np.tile([0.05, -0.052], 200)
    methods = ["mean", "nearest", "kriging", "forest"]
    ranks = rank_methods(methods, np.stack([kriging + 0.2, kriging + 0.05, kriging, forest]), np.empty((0, 400)))
    assert ranks[2].standard_error == pytest.approx(0.00255)
    assert [r.simplest for r in ranks] == [False, False, True, False]
    assert [r.apart for r in ranks][:2] == [True, True]
    assert cannot_be_told_apart(ranks) == "forest cannot be told apart from kriging on these stations"


def test_standard_error_is_that_of_paired_differences():
    energy = energies(0.0, 0.02)
    ranks = rank_methods(["nearest", "kriging"], energy, np.empty((0, 400)))
    difference = energy[1] - energy[0]
    assert ranks[1].above_best == pytest.approx(difference.mean())
    assert ranks[1].standard_error == pytest.approx(difference.std() / 20.0)


def test_blocks_that_err_together_widen_the_interval():
    rng = np.random.default_rng(1)
    points = rng.uniform(0, 100, (400, 2))
    block = np.floor(points / 20.0) @ [10, 1]
    shift = dict(zip(np.unique(block), 0.05 * rng.standard_normal(25), strict=True))
    together = np.stack([np.full(400, 0.2), 0.2 + np.array([shift[b] for b in block])])
    alone = rank_methods(["nearest", "kriging"], together, np.empty((0, 400)))
    blocks = rank_methods(["nearest", "kriging"], together, block_weights(points, 20.0, 1))
    assert max(r.standard_error for r in blocks) > 2.5 * max(r.standard_error for r in alone)


def test_rows_that_one_method_lacks_are_left_out_of_all():
    energy = energies(0.0, 0.1)
    energy[0, :200] = np.nan
    ranks = rank_methods(["nearest", "kriging"], energy, np.empty((0, 400)))
    assert ranks[1].energy_score == pytest.approx(energy[1, 200:].mean())
    assert rank_methods(["nearest"], np.full((1, 5), np.nan), np.empty((0, 5))) == []
    assert cannot_be_told_apart([]) == ""
