"""What the stations say becomes columns: candidates by the data, words and limits, rows that are not exact, and what limits move."""

from dataclasses import replace

import numpy as np
import pytest

from benchmarks.zeros import PARTS, observations, recipe, simulate
from texture.choosing import limit_effect
from texture.composition import LogRatio, classify
from texture.errors import RecipeError
from texture.learning import learn
from texture.mapping import make_mapper
from texture.observations import Observations
from texture.treatments import Presence, Replace, Shares, candidates

LR = LogRatio(PARTS)
NAN = float("nan")


def damaged(kind: str, share: float, seed: int):
    """Of 260 stations 80 stay exact; the others know their mud, or a class in words, or mud : sand, or limits such as `<1`."""
    field = simulate(kind, share, seed)
    cells, truth, points, measured = field.cells, field.truth, field.points, field.measured
    n = len(points)
    what = np.array(["exact"] * 80 + [("mud", "words", "fines", "limits")[i % 4] for i in range(n - 80)])
    np.random.default_rng(100 + seed).shuffle(what)
    o, fractions = observations(points, measured), measured.copy()
    fractions[what == "mud", 1:] = NAN
    fractions[~np.isin(what, ["exact", "mud"])] = NAN
    described = np.where(what == "words", classify(measured, "folk", trace=0.01), "").astype("<U8")
    fines = np.where(what == "fines", measured[:, 0] / measured[:, :2].sum(axis=1), NAN)
    edges = np.array([0.0, 0.01, 0.05, 0.3, 0.8, 1.0])
    band = np.clip(np.searchsorted(edges, measured[:, 2], side="right") - 1, 0, 4)
    tenth = np.minimum(np.floor(measured[:, 0] * 10) / 10, 0.9)
    low = np.column_stack([tenth, np.zeros(n), edges[band]])
    high = np.column_stack([tenth + 0.1, np.ones(n), edges[band + 1]])
    limits = (what == "limits")[:, None]
    mixed = replace(
        o, fractions=fractions, described=described, mud_of_fines=fines, measured=what != "words",
        low=np.where(limits, low, NAN), high=np.where(limits, high, NAN),
    )  # fmt: skip
    return cells, truth, mixed, what


def rmse(some: Observations, cells, truth):
    method = recipe().method
    mapper = make_mapper("kriging", learn(Replace(LR), some, method), method)
    return np.sqrt(((mapper.expected(*mapper.predict(cells)) - truth) ** 2).mean(axis=0))


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "share"), [("patches", 0.0), ("small", 0.3)])
def test_rows_that_are_not_exact_beat_leaving_them_out(kind, share):
    ratios = {"all": [], "mud": [], "words": [], "fines": [], "limits": []}
    for seed in (1, 2, 3, 4):
        cells, truth, mixed, what = damaged(kind, share, seed)
        alone = rmse(mixed.take(np.flatnonzero(what == "exact")), cells, truth)
        for name, found in ratios.items():
            used = np.flatnonzero((what == "exact") | (what == name) | (name == "all"))
            found.append(rmse(mixed.take(used), cells, truth) / alone)
    mean = {name: np.mean(values, axis=0) for name, values in ratios.items()}
    assert (np.array(ratios["all"])[:, 0] < 0.95).all()  # mud, with every seed
    assert (mean["all"] < 0.95).all()
    for name in ("mud", "words", "fines", "limits"):
        assert mean[name][0] < 0.98, name
        assert mean[name][1] < 0.99, name


def test_candidates_follow_the_data_and_the_recipe():
    field = simulate("patches", 0.3, 1)
    points, o = field.points, observations(field.points, field.measured)
    names = [(type(t).__name__, t.limit) for t in candidates(recipe().composition, o, True)]
    assert names[:3] == [("Replace", 0.005), ("Replace", 0.02), ("Replace", 0.05)]
    assert [n for n, _ in names[3:]] == ["Shares", "Presence", "Censor"]
    assert "Censor" not in {type(t).__name__ for t in candidates(recipe().composition, o, False)}
    assert [type(t) for t in candidates(recipe(logratio="shares").composition, o, True)] == [Shares]
    assert [type(t) for t in candidates(recipe(zeros="presence").composition, o, True)] == [Presence]
    kinds = {type(t) for t in candidates(recipe(logratio="ilr").composition, o, True)}
    assert kinds == {Replace, Shares}
    whole = observations(points, np.tile([0.3, 0.4, 0.3], (len(points), 1)))
    assert [type(t) for t in candidates(recipe().composition, whole, True)] == [Replace, Shares]
    with pytest.raises(RecipeError, match="needs a method with a variance"):
        candidates(recipe(zeros="censor").composition, o, False)
    with pytest.raises(ValueError, match='"censor" works with logratio = tree or alr, found "shares"'):
        recipe(zeros="censor", logratio="shares")


def test_presence_reads_words_and_limits_only_where_they_tell():
    n = 6
    o = observations(np.zeros((n, 2)), np.array([[0.5, 0.4, 0.1], [0.5, 0.5, 0.0], *[[NAN] * 3] * 4]))
    low, high = o.low.copy(), o.high.copy()
    low[2], high[2] = [0.0, 0.0, 0.05], [1.0, 1.0, 0.3]  # gravel 5 to 30 %
    low[3], high[3] = [0.0, 0.0, 0.0], [1.0, 1.0, 0.01]  # "<1": there or not
    o = replace(o, low=low, high=high, described=np.array(["", "", "", "", "gM", "mS"]))
    values, noise = Presence(LR).columns(o)
    np.testing.assert_array_equal(values[:, 2], [1, 0, 1, NAN, NAN, NAN])
    assert np.isfinite(values[:, 1]).tolist() == [True, False, True, False, True, False]
    assert (noise[np.isnan(values)] == 0.0).all()


def test_half_and_twice_the_limit_move_the_mean_of_what_is_replaced():
    field = simulate("patches", 0.3, 1)
    cells, o, method = field.cells, observations(field.points, field.measured), recipe().method

    def kriged(learned):
        return make_mapper("kriging", learned, method)

    effect = limit_effect(learn(Replace(LR), o, method), method, cells[::7], kriged)
    assert effect.cells == len(cells[::7])
    assert effect.halved[2] < effect.mean[2] < effect.doubled[2]
    np.testing.assert_allclose([sum(effect.mean), sum(effect.halved), sum(effect.doubled)], 1.0, atol=1e-9)
    assert limit_effect(learn(Shares(LogRatio(PARTS, "shares")), o, method), method, cells[::7], kriged) is None
