"""How stations are held out: each alone, at random, in blocks, or matched to the map.

All designs return labels (the fold that holds each station out). Stations at one place are never
split between folds: they would predict each other.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from texture.errors import StructureError
from texture.validation.matching import Match, match_labels, outside_distances

__all__ = ["Folds", "make_folds", "matched_folds"]

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Folds:
    """Which fold holds each station out.

    Attributes
    ----------
    labels : int array, shape (n,)
        Fold of each station, from 0.
    kind : str
        Design as it was made, "matched", "random", "blocks" or "each".
    wasserstein, wasserstein_random : float
        Wasserstein-1 distance in metres between the distances held-out → kept stations and the distances
        map → stations, for these folds and for random ones; NaN where no map was given.
    note : str
        Size of the blocks, and what was changed from what was asked; empty if there is nothing to say.
    """

    labels: Ints
    kind: str
    wasserstein: float
    wasserstein_random: float
    note: str = ""

    @property
    def count(self) -> int:
        """Number of folds."""
        return int(self.labels.max()) + 1

    def pairs(self) -> list[tuple[Ints, Ints]]:
        """Return (train, test) index arrays, one pair for each fold."""
        return [(np.flatnonzero(self.labels != k), np.flatnonzero(self.labels == k)) for k in range(self.count)]

    def held_out_distances(self, points: Floats) -> Floats:
        """Distance from each held-out station to the nearest kept one, in metres, shape (n,)."""
        return outside_distances(points, self.labels)

    def __repr__(self) -> str:
        sizes = np.bincount(self.labels)
        return f"<Folds {self.kind}: {self.count} of {sizes.min()}…{sizes.max()} stations, W {self.wasserstein:,.0f} m>"


def matched_folds(points: Floats, targets: Floats, count: int, seed: int = 1) -> list[tuple[Ints, Ints]]:
    """Return k-fold nearest-neighbour-distance matched folds as (train, test) index arrays.

    Parameters
    ----------
    points : float array, shape (n, d)
        Stations, metres.
    targets : float array, shape (m, d)
        Places where the map is wanted; the folds' station-to-station distances are made to look like the
        distances from these to the stations.
    count : int
        Number of folds.
    seed : int
        Seed of the random start.

    References
    ----------
    Linnenbrink, Milà, Ludwig & Meyer (2024), Geoscientific Model Development 17.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> cells = rng.uniform(0, 1000, (500, 2))
    >>> folds = matched_folds(rng.uniform(0, 200, (40, 2)), cells, 4)
    >>> sorted(np.concatenate([test for _, test in folds]).tolist()) == list(range(40))
    True
    """
    return make_folds("matched", points, count, seed, targets).pairs()


def make_folds(
    kind: str,
    points: Floats,
    count: int,
    seed: int,
    targets: Floats | None = None,
    block_m: float | None = None,
    groups: Ints | None = None,
) -> Folds:
    """Make folds of one design.

    Parameters
    ----------
    kind : {"matched", "random", "blocks", "each"}
    points : float array, shape (n, d), metres
    count : int
        Folds wanted; fewer are made where there are fewer places, and the note says so.
    seed : int
    targets : float array, shape (m, d), optional
        Places of the map, needed by "matched"; where given, W is reported for every design.
    block_m : float, optional
        Side of a block for "blocks".
    groups : int array, shape (n,), optional
        Stations of one group, such as a survey, are never split. They come first, then places, then the design.

    Raises
    ------
    StructureError
        With fewer than two places, or a design that lacks what it needs.
    """
    points = np.asarray(points, dtype=np.float64)
    place = _units(points, groups)
    places = int(place.max()) + 1 if place.size else 0
    units = "places" if groups is None else "separate groups"
    if places < 2:
        what = f"stand at {places} place" if groups is None else f"make {places} group that shares places"
        raise StructureError(f"stations {what}; expected at least 2 to hold some out")
    rng = np.random.default_rng(seed)
    note = f"blocks of {block_m:,.0f} m" if kind == "blocks" and block_m else ""
    verb = "stand at" if groups is None else "make"
    if kind != "each" and places < count:
        note = _also(note, f"{count} folds were asked, but stations {verb} {places} {units}: {places} folds")
        count = places
    random = _deal(places, count, rng)[place]
    if kind == "each":
        labels = place
    elif kind == "random":
        labels = random
    elif kind == "blocks" and groups is not None:
        # Surveys that overlap would chain their blocks into one: whole groups are dealt instead.
        labels, note = _fill(place, count, rng)[place], _also("whole groups instead of blocks", note.partition("; ")[2])
    elif kind == "blocks":
        if block_m is None or not block_m > 0.0:
            raise StructureError(f"block folds need a block size above 0 m; found {block_m}")
        labels, note = _blocks(points, block_m, count, rng, note, place)
    elif kind == "matched":
        if targets is None:
            raise StructureError("matched folds need the places of the map")
        return _matched(points, targets, place, count, random, note)
    else:
        raise StructureError(f'folds "{kind}" are unknown; expected matched, random, blocks or each')
    match = Match.of(points, targets) if targets is not None else None
    return Folds(
        labels,
        kind,
        wasserstein=match.statistic(labels) if match else np.nan,
        wasserstein_random=match.statistic(random) if match else np.nan,
        note=note,
    )


def _matched(points: Floats, targets: Floats, place: Ints, count: int, random: Ints, note: str) -> Folds:
    match = Match.of(points, targets)
    labels = match_labels(match, place, count, random)
    statistic, by_chance = match.statistic(labels), match.statistic(random)
    return Folds(labels, "matched", statistic, by_chance, note)


def _also(note: str, more: str) -> str:
    return "; ".join(part for part in (note, more) if part)


def _places(points: Floats) -> Ints:
    """Number the places; stations within half a metre of a lattice of a metre are at one place."""
    _, place = np.unique(np.round(points), axis=0, return_inverse=True)
    return place.reshape(-1).astype(np.int64)


def _units(points: Floats, groups: Ints | None) -> Ints:
    """Number what is never split: places, or all that groups and places hold together."""
    place = _places(points)
    return place if groups is None else _joined(place, np.asarray(groups, dtype=np.int64))


def _joined(a: Ints, b: Ints) -> Ints:
    """Number the smallest sets that split neither what shares a number in `a` nor what does in `b`."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    first, second = (np.unique(v, return_inverse=True)[1].reshape(-1) for v in (a, b))
    size = int(first.max()) + 1
    links = coo_array((np.ones(first.size), (first, second + size)), shape=(size + int(second.max()) + 1,) * 2)
    component = connected_components(links, directed=False)[1][first]
    return np.unique(component, return_inverse=True)[1].reshape(-1).astype(np.int64)


def _deal(items: int, count: int, rng: np.random.Generator) -> Ints:
    """Deal items into folds whose sizes differ by at most one."""
    labels = np.arange(items, dtype=np.int64) % count
    rng.shuffle(labels)
    return labels


def _blocks(
    points: Floats, block_m: float, count: int, rng: np.random.Generator, note: str, unit: Ints
) -> tuple[Ints, str]:
    """Deal square blocks, those that share a unit together, into folds, the fullest first, each into the emptiest fold."""
    corner = points.min(axis=0)
    _, block = np.unique(np.floor((points - corner) / block_m), axis=0, return_inverse=True)
    block = _joined(block.reshape(-1), unit)
    sizes = np.bincount(block)
    if sizes.size < 2:
        raise StructureError(f"one block of {block_m:g} m holds all stations; choose a smaller block size")
    if sizes.size < count:
        note = _also(note, f"{count} folds were asked, but there are {sizes.size} blocks: {sizes.size} folds")
        count = sizes.size
    return _fill(block, count, rng)[block], note


def _fill(unit: Ints, count: int, rng: np.random.Generator) -> Ints:
    """Fold of each unit: the fullest first, each into the emptiest fold."""
    sizes = np.bincount(unit)
    order = rng.permutation(sizes.size)
    order = order[np.argsort(-sizes[order], kind="stable")]
    fold_of, load = np.empty(sizes.size, dtype=np.int64), np.zeros(count)
    for b in order:
        fold_of[b] = int(np.argmin(load))
        load[fold_of[b]] += sizes[b]
    return fold_of
