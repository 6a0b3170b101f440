"""Which treatment of zeros is taken: by hand, and on simulated beds whose truth is known."""

from functools import cache
from types import SimpleNamespace

import numpy as np
import pytest

from benchmarks.zeros import FIELDS, LIMIT, PARTS, outcomes, simulate
from texture.composition import LogRatio
from texture.treatments import Censor, Presence, Replace, Shares
from texture.zero_choice import choose

LR = LogRatio(PARTS)
NAN = float("nan")
# The rule was set while looking at seeds 1 to 15; these were run once it stood.
SEEDS = (21, 22, 23)
PLAIN, CENSORED, PATCHES = ("Replace", LIMIT), ("Censor", LIMIT), ("Presence", LIMIT)


@cache
def outcome(kind: str, share: float, seed: int):
    """Every treatment by its class and limit, and the one that was chosen under its own name."""
    found = outcomes(simulate(kind, share, seed))
    return {o.key: o for o in found} | {"chosen": next(o for o in found if o.chosen)}


def mean_over_seeds(kind, share, key, value):
    return np.mean([value(outcome(kind, share, seed)[key]) for seed in SEEDS])


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "share"), FIELDS)
def test_held_out_error_picks_nearly_the_best(kind, share):
    """Within 2 % of the best treatment, and without bias: mean errors under a tenth beyond the luck of the stations.

    A map's mean error is mostly luck, which the oracle shares (`benchmarks.zeros`): what is left is the treatment's own. Over
    fields, the bounds are those asked for. In a single field what is left has luck too, and so has which treatment fits
    best: seen here were 3.6 % above the best, small values at 70 %, and a mean error 0.1002 beyond the oracle's, patches at
    70 %. The bounds for single fields allow for that and were set after seeing it.
    """
    runs = [outcome(kind, share, seed) for seed in SEEDS]
    everywhere = set.intersection(*(set(run) for run in runs))
    best = min(np.mean([run[key].whole for run in runs]) for key in everywhere)
    assert np.mean([run["chosen"].whole for run in runs]) < 1.02 * best
    assert (np.abs(np.mean([run["chosen"].beyond_luck for run in runs], axis=0)) < 0.1).all()
    for run in runs:
        assert run["chosen"].whole < 1.04 * min(o.whole for o in run.values())
        assert (np.abs(run["chosen"].beyond_luck) < 0.11).all()


@pytest.mark.slow
def test_presence_knows_patches_and_replacement_at_the_limit_does_not():
    for share in (0.3, 0.7):
        plain = mean_over_seeds("patches", share, PLAIN, lambda o: o.rmse[2])
        assert mean_over_seeds("patches", share, PATCHES, lambda o: o.rmse[2]) < 0.99 * plain
        # A zero is not a small value here: what takes it for one is worse than even replacement.
        assert mean_over_seeds("patches", share, CENSORED, lambda o: o.rmse[2]) > plain


@pytest.mark.slow
def test_censoring_knows_small_values_and_higher_limits_do_not():
    # Errors are as small either way (a few rich samples make them); censoring has the mean right.
    plain = mean_over_seeds("small", 0.7, PLAIN, lambda o: o.rmse[2])
    assert mean_over_seeds("small", 0.7, CENSORED, lambda o: o.rmse[2]) < 1.02 * plain
    too_much = mean_over_seeds("small", 0.7, PLAIN, lambda o: o.beyond_luck[2])
    assert abs(mean_over_seeds("small", 0.7, CENSORED, lambda o: o.beyond_luck[2])) < 0.1 < too_much
    # Lifting every zero to two thirds of a limit far above them invents gravel.
    assert mean_over_seeds("small", 0.7, ("Replace", 0.05), lambda o: o.mean_error[2]) > 1.0


@pytest.mark.slow
def test_without_zeros_all_agree():
    run = outcome("patches", 0.0, SEEDS[0])
    assert run[PLAIN].chosen
    assert max(o.whole for o in run.values()) < 1.01 * min(o.whole for o in run.values())


def held(predicted):
    return SimpleNamespace(predicted=np.asarray(predicted, dtype=float))


def test_the_choice_by_hand():
    measured = np.array([[0.2, 0.8, 0.0], [0.4, 0.6, 0.0], [0.6, 0.2, 0.2], [0.8, NAN, NAN]])
    exact = np.where(np.isnan(measured), 0.1, measured)
    off, worse = exact + np.array([0.0, 0.0, 0.03]), exact + [[0.1, 0.0, 0.0]] * np.array([[1], [-1], [1], [-1]])
    first, second, third = Replace(LR), Shares(LogRatio(PARTS, "shares")), Censor(LR)
    tried = choose([first, second, third], [held(worse), held(exact), held(off)], measured, 0.005).tried
    assert [t.chosen for t in tried] == [False, True, False]
    # Mud: squared error 0.01 over the variance of 0.2, 0.4, 0.6, 0.8, which is 0.05.
    assert tried[0].error == pytest.approx(0.01 / 0.05)
    assert tried[0].above_best == tried[0].error
    assert tried[1].error == 0.0
    # One value above the limit does not tell what zeros are: gravel is 0.0667 to 0.07 in the mean, and 0.03 is more than a tenth.
    assert [t.balanced for t in tried] == [True, True, False]


def test_the_first_is_taken_on_a_tie_and_all_compete_where_none_is_balanced():
    rng = np.random.default_rng(1)
    measured = np.column_stack([rng.uniform(0.2, 0.8, 50), np.full(50, NAN), np.full(50, NAN)])
    noisy = measured + rng.normal(0, 0.1, (50, 1))
    other = measured + rng.normal(0, 0.1, (50, 1))
    both = [Replace(LR), Censor(LR)]
    worse, better = sorted([noisy, other], key=lambda p: -np.nansum((p - measured) ** 2))
    tie = choose(both, [held(worse), held(better)], measured, 0.005).tried
    assert tie[0].above_best > 0.0
    assert tie[0].above_best < tie[0].standard_error
    assert tie[0].chosen
    biased = [held(measured + 0.2), held(measured + 0.1)]
    assert [t.chosen for t in choose(both, biased, measured, 0.005).tried] == [False, True]
    assert not any(t.balanced for t in choose(both, biased, measured, 0.005).tried)


def zeros_and_gravel(absent: bool, n: int = 200):
    """Measured fractions: a third of the gravel absent and the rest about 30 %, or all of it one lognormal with a third below 0.005."""
    rng = np.random.default_rng(4)
    z = rng.normal(size=n)
    gravel = 1 / (1 + np.exp(0.8 - 0.5 * z)) if absent else 0.005 * np.exp(1.5 * (z + 0.43))
    gravel = np.where((rng.uniform(size=n) < 1 / 3) if absent else (gravel < 0.005), 0.0, np.minimum(gravel, 0.5))
    mud = rng.uniform(0.1, 0.5, n)
    return np.column_stack([mud, 1 - mud - gravel, gravel])


@pytest.mark.parametrize("absent", [True, False])
def test_among_equals_the_one_is_taken_that_the_measured_values_speak_for(absent):
    measured = zeros_and_gravel(absent)
    mean = measured.mean(axis=0) if absent else measured.mean(axis=0) + np.array([0, -0.0008, 0.0008])
    flat = np.broadcast_to(mean, measured.shape)
    far = held(flat + np.array([0.2, -0.2, 0.0]))
    kinds = [Replace(LR), Shares(LogRatio(PARTS, "shares")), Presence(LR), Censor(LR)]
    choice = choose(kinds, [far, held(flat), held(flat), held(flat)], measured, 0.005)
    assert choice.unseen[2].absent == absent
    assert type(choice.chosen.treatment) is (Presence if absent else Censor)


def test_what_lies_unseen_decides_who_is_balanced():
    # Small values: what predicts the measured mean, zeros as 0, is too low by what the zeros hold.
    measured = zeros_and_gravel(False)
    measured[:, 2] *= 0.1  # still the upper part of one distribution: now of 0.0005
    measured[:, 1] = 1 - measured[:, 0] - measured[:, 2]
    choice = choose([Replace(LR)], [held(np.broadcast_to(measured.mean(axis=0), measured.shape))], measured, 0.0005)
    worth = choice.unseen[2].mean * (measured[:, 2] < 0.0005).mean() / measured[:, 2].mean()
    assert choice.tried[0].balanced == (worth / (1 + worth) < 0.1)
    low = measured.mean(axis=0) * [1, 1, 0.88]
    assert not choose([Replace(LR)], [held(np.broadcast_to(low, measured.shape))], measured, 0.0005).tried[0].balanced


def test_choosing_is_scored_without_the_fold_that_it_predicts():
    rng = np.random.default_rng(7)
    measured = np.column_stack([rng.uniform(0.2, 0.8, 90), np.full((90, 2), NAN)])
    folds = np.arange(90) % 9
    # Nothing to choose between: equally bad guesses. The lowest of many is low by luck, choosing is not.
    guesses = [held(0.5 + rng.uniform(-0.15, 0.15, (90, 1)) * [1, 0, 0]) for _ in range(12)]
    choice = choose([Replace(LR)] * 12, guesses, measured, 0.005, folds)
    assert choice.chosen.error < choice.blind_error
    # With one candidate there is nothing to choose, and nothing to correct.
    alone = choose([Replace(LR)], guesses[:1], measured, 0.005, folds)
    assert alone.blind_error == pytest.approx(alone.chosen.error)
    assert np.isnan(choose([Replace(LR)], guesses[:1], measured, 0.005).blind_error)
