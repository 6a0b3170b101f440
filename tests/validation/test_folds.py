"""Folds: the published small case, and what must hold for any stations."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.errors import StructureError
from texture.validation.folds import make_folds, matched_folds
from texture.validation.matching import Match, outside_distances

# Linnenbrink et al. (2024), small case: best partition by enumeration of all 31 splits.
STATIONS = np.array([(1, 1), (1, 2), (2, 2), (2, 3), (1, 4), (5, 4)], dtype=float)
CELLS = np.array(
    [
        (x, y)
        for x in (0.4190187, 2.6550866, 4.8911546, 7.1272226, 9.3632906)
        for y in (1.485171, 3.721239, 5.957307, 8.193375)
    ]
)


def clustered(rng, clusters=5, each=20, sd=4.0):
    return np.concatenate([rng.normal(c, sd, (each, 2)) for c in rng.uniform(0, 100, (clusters, 2))]) * 1000


def test_published_case_finds_the_best_partition():
    folds = make_folds("matched", STATIONS, 2, 1, CELLS)
    assert folds.wasserstein == pytest.approx(1.091896, abs=1e-5)
    assert folds.labels.tolist() in ([0, 0, 0, 0, 1, 1], [1, 1, 1, 1, 0, 0])
    expected = [3, 2, 2.236068, 1.414214, 1.414214, 3.162278]
    np.testing.assert_allclose(folds.held_out_distances(STATIONS), expected, atol=1e-5)


def test_published_leave_one_out_statistic():
    assert Match.of(STATIONS, CELLS).statistic(np.arange(6)) == pytest.approx(1.659836, abs=1e-5)


@given(st.integers(0, 10_000), st.sampled_from(["matched", "random", "blocks"]), st.integers(2, 8))
@settings(max_examples=30, deadline=None)
def test_every_station_is_held_out_once_and_places_stay_together(seed, kind, count):
    rng = np.random.default_rng(seed)
    points = clustered(rng)
    points[:5] = points[5:10]  # repeat grabs
    cells = rng.uniform(0, 100_000, (300, 2))
    folds = make_folds(kind, points, count, seed, cells, block_m=20_000.0)
    assert sorted(np.concatenate([test for _, test in folds.pairs()]).tolist()) == list(range(len(points)))
    assert (folds.labels[:5] == folds.labels[5:10]).all()
    for train, test in folds.pairs():
        assert not set(train) & set(test)


@given(st.integers(0, 10_000))
@settings(max_examples=15, deadline=None)
def test_matched_is_never_further_from_the_map_than_random(seed):
    rng = np.random.default_rng(seed)
    folds = make_folds("matched", clustered(rng), 5, seed, rng.uniform(0, 100_000, (300, 2)))
    assert folds.wasserstein <= folds.wasserstein_random


def test_spread_stations_get_random_folds():
    rng = np.random.default_rng(3)
    cells = rng.uniform(0, 100_000, (2000, 2))
    points = rng.uniform(0, 100_000, (150, 2))
    matched, random = (make_folds(kind, points, 10, 7, cells) for kind in ("matched", "random"))
    assert (matched.labels == random.labels).all()


def test_clustered_stations_are_held_out_from_further_away():
    rng = np.random.default_rng(4)
    points, cells = clustered(rng, each=30), rng.uniform(0, 100_000, (2000, 2))
    matched, random = (make_folds(kind, points, 5, 7, cells) for kind in ("matched", "random"))
    assert np.median(matched.held_out_distances(points)) > 3 * np.median(random.held_out_distances(points))


def test_blocks_do_not_share_a_cell():
    rng = np.random.default_rng(5)
    points = rng.uniform(0, 100_000, (200, 2))
    folds = make_folds("blocks", points, 5, 1, block_m=10_000.0)
    block = np.floor((points - points.min(axis=0)) / 10_000.0) @ [1000, 1]
    for train, test in folds.pairs():
        assert not set(block[train]) & set(block[test])


def test_outside_distances_equal_brute_force_deep_inside_a_fold():
    rng = np.random.default_rng(6)
    points = rng.normal(0, 1, (300, 2))
    labels = (points[:, 0] > 0).astype(np.int64)  # two large folds: most stations have no stranger among their nearest
    gaps = np.linalg.norm(points[:, None] - points[None], axis=2)
    expected = np.where(labels[:, None] != labels[None], gaps, np.inf).min(axis=1)
    np.testing.assert_allclose(outside_distances(points, labels), expected, rtol=1e-12)


def test_fewer_places_than_folds_is_said():
    points = np.repeat(STATIONS[:3] * 1000, 2, axis=0)
    folds = make_folds("random", points, 10, 1)
    assert folds.count == 3
    assert folds.note == "10 folds were asked, but stations stand at 3 places: 3 folds"


@given(st.integers(0, 10_000), st.sampled_from(["matched", "random", "blocks", "each"]))
@settings(max_examples=20, deadline=None)
def test_surveys_come_before_places_and_the_design(seed, kind):
    rng = np.random.default_rng(seed)
    points = clustered(rng)
    survey = rng.integers(0, 6, len(points))
    points[3] = points[np.flatnonzero(survey != survey[3])[0]]  # two surveys at one place: held out together
    cells = rng.uniform(0, 100_000, (300, 2))
    folds = make_folds(kind, points, 4, seed, cells, block_m=20_000.0, groups=survey)
    for number in range(6):
        assert np.unique(folds.labels[survey == number]).size == 1
    _, place = np.unique(np.round(points), axis=0, return_inverse=True)
    for p in np.unique(place):
        assert np.unique(folds.labels[place.reshape(-1) == p]).size == 1


def test_fewer_surveys_than_folds_is_said():
    points = np.random.default_rng(0).uniform(0, 1000, (30, 2))
    folds = make_folds("random", points, 10, 1, groups=np.arange(30) % 3)
    assert folds.count == 3
    assert folds.note == "10 folds were asked, but stations make 3 separate groups: 3 folds"
    with pytest.raises(StructureError, match="make 1 group that shares places; expected at least 2"):
        make_folds("random", points, 10, 1, groups=np.zeros(30, dtype=int))


def test_mistakes():
    with pytest.raises(StructureError, match="1 place; expected at least 2"):
        make_folds("random", np.zeros((4, 2)), 2, 1)
    with pytest.raises(StructureError, match="block size above 0 m; found None"):
        make_folds("blocks", STATIONS * 1000, 2, 1)
    with pytest.raises(StructureError, match="one block of 1e\\+06 m holds all"):
        make_folds("blocks", STATIONS * 1000, 2, 1, block_m=1e6)
    with pytest.raises(StructureError, match='"nearest" are unknown'):
        make_folds("nearest", STATIONS, 2, 1)
    with pytest.raises(StructureError, match="need the places of the map"):
        make_folds("matched", STATIONS, 2, 1)


def test_public_form_gives_index_pairs():
    pairs = matched_folds(STATIONS, CELLS, 2, seed=1)
    assert [(train.tolist(), test.tolist()) for train, test in pairs] == [
        ([4, 5], [0, 1, 2, 3]),
        ([0, 1, 2, 3], [4, 5]),
    ]
