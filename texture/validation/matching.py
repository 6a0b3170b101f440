"""Folds whose held-out distances look like the map's distances (k-fold nearest-neighbour matching).

After Linnenbrink, Milà, Ludwig & Meyer (2024), Geoscientific Model Development 17: stations are
clustered at many sizes, clusters are merged into folds, and the partition is kept whose distribution
of distances from held-out to kept stations is nearest, in Wasserstein-1, to the distribution of
distances from the map's cells to the stations. Where the stations are spread no denser than the map
asks for, random folds are the answer.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Match", "match_labels", "outside_distances"]

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]

LARGEST_FOLD = 0.5  # a fold that holds out more than this share leaves too little to fit
LARGEST_OF_TWO = 0.8  # of two folds one is always at least half
MOST_LEAVES = 2000  # the clustering is quadratic, so larger sets are first gathered into this many groups
CLUSTER_COUNTS = 40  # numbers of clusters tried, evenly spaced in their logarithm
NEAREST = 48  # neighbours looked up once; the few stations deeper inside a fold are asked again


def outside_distances(points: Floats, labels: Ints, neighbours: tuple[Floats, Ints] | None = None) -> Floats:
    """Distance from each station to the nearest station of another fold, shape (n,)."""
    from scipy.spatial import KDTree

    if neighbours is None:
        neighbours = _neighbours(points)
    distance, index = neighbours
    other = labels[index] != labels[:, None]
    first = np.argmax(other, axis=1)
    rows = np.arange(labels.size)
    result = np.where(other[rows, first], distance[rows, first], np.nan)
    deep = np.flatnonzero(np.isnan(result))
    for fold in np.unique(labels[deep]):
        asking = deep[labels[deep] == fold]
        rest = points[labels != fold]
        if rest.size:
            result[asking] = KDTree(rest).query(points[asking])[0]
    return result


def _neighbours(points: Floats) -> tuple[Floats, Ints]:
    from scipy.spatial import KDTree

    k = min(NEAREST + 1, points.shape[0])
    distance, index = KDTree(points).query(points, k=k)
    return distance, index


@dataclass(frozen=True, eq=False)
class Match:
    """What partitions are judged by: the stations, their neighbours, and the map's distances."""

    points: Floats
    neighbours: tuple[Floats, Ints]
    map_distances: Floats

    @classmethod
    def of(cls, points: Floats, targets: Floats) -> Match:
        """Look up neighbours and the map's distances once."""
        from scipy.spatial import KDTree

        return cls(points, _neighbours(points), KDTree(points).query(targets)[0])

    def statistic(self, labels: Ints) -> float:
        """Wasserstein-1 distance between held-out distances and the map's distances, metres."""
        from scipy.stats import wasserstein_distance

        return float(wasserstein_distance(outside_distances(self.points, labels, self.neighbours), self.map_distances))

    def random_will_do(self) -> bool:
        """Tell whether stations are spread no denser than the map asks for (one-sided Kolmogorov-Smirnov)."""
        from scipy.stats import ks_2samp

        own = np.arange(self.points.shape[0])
        between = outside_distances(self.points, own, self.neighbours)
        return bool(ks_2samp(between, self.map_distances, alternative="greater", method="asymp").pvalue >= 0.05)


def match_labels(match: Match, place: Ints, count: int, random: Ints) -> Ints:
    """Return the labels with the smallest statistic among random folds and merged clusters.

    Parameters
    ----------
    match : Match
    place : int array, shape (n,)
        Place of each station; a place is never split.
    count : int
        Number of folds.
    random : int array, shape (n,)
        Random folds, the answer where they will do, so that the result is never worse than they.
    """
    places = int(place.max()) + 1
    if match.random_will_do() or places <= count:
        return random
    weight = np.bincount(place)
    where = np.column_stack([np.bincount(place, column) / weight for column in match.points.T])
    largest = LARGEST_OF_TWO if count == 2 else LARGEST_FOLD
    best, least = random, match.statistic(random)
    for clusters in _clusterings(where, count):
        for fold_of_cluster in _merges(where, weight, clusters, count):
            labels = fold_of_cluster[clusters][place]
            sizes = np.bincount(labels, minlength=count)
            if sizes.max() > largest * labels.size or sizes.min() == 0:
                continue
            statistic = match.statistic(labels)
            if statistic < least:
                best, least = labels, statistic
    return best


def _clusterings(where: Floats, count: int) -> list[Ints]:
    """Cluster places hierarchically (average linkage) at many numbers of clusters."""
    from scipy.cluster.hierarchy import cut_tree, linkage

    leaf = _leaves(where)
    leaves = int(leaf.max()) + 1
    centre = np.column_stack([np.bincount(leaf, where[:, k]) / np.bincount(leaf) for k in range(where.shape[1])])
    if leaves <= count:
        return [leaf]
    wanted = np.unique(np.round(np.geomspace(count, leaves, CLUSTER_COUNTS)).astype(int))
    cuts = cut_tree(linkage(centre, "average"), n_clusters=wanted)
    return [cuts[:, i].astype(np.int64)[leaf] for i in range(wanted.size)]


def _leaves(where: Floats) -> Ints:
    """Gather places into at most `MOST_LEAVES` compact groups by halving along the longer side."""
    leaf = np.zeros(where.shape[0], dtype=np.int64)
    if where.shape[0] <= MOST_LEAVES:
        return np.arange(where.shape[0], dtype=np.int64)
    groups = [np.arange(where.shape[0])]
    while len(groups) * 2 <= MOST_LEAVES:
        halves = []
        for group in groups:
            axis = int(np.argmax(np.ptp(where[group], axis=0)))
            order = group[np.argsort(where[group, axis], kind="stable")]
            halves += [order[: order.size // 2], order[order.size // 2 :]]
        groups = halves
    for i, group in enumerate(groups):
        leaf[group] = i
    return leaf


def _merges(where: Floats, weight: Ints, clusters: Ints, count: int) -> list[Ints]:
    """Ways of merging clusters into folds: dealt out along the main axis, and filled by size."""
    number = int(clusters.max()) + 1
    if number == count:
        return [np.arange(count, dtype=np.int64)]
    size = np.bincount(clusters, weight, minlength=number)
    centred = where - where.mean(axis=0)
    axis = np.linalg.svd(centred, full_matrices=False)[2][0]
    along = np.bincount(clusters, (centred @ axis) * weight, minlength=number) / size
    dealt = np.empty(number, dtype=np.int64)
    dealt[np.argsort(along, kind="stable")] = np.arange(number) % count
    contiguous = np.empty(number, dtype=np.int64)
    order = np.argsort(along, kind="stable")
    contiguous[order] = np.minimum((np.cumsum(size[order]) - size[order] / 2) * count / size.sum(), count - 1).astype(
        int
    )
    filled, load = np.empty(number, dtype=np.int64), np.zeros(count)
    for cluster in np.argsort(-size, kind="stable"):
        filled[cluster] = int(np.argmin(load))
        load[filled[cluster]] += size[cluster]
    return [dealt, contiguous, filled]
