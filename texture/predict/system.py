"""Columns that share stations and metric, prepared for the compiled kernel and run on threads."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.predict.inputs import Stations
from texture.predict.threads import in_parts_of_equal_cost
from texture.structure.covariance import Covariance

if TYPE_CHECKING:
    from texture.predict.block import Cells
    from texture.predict.equations import Factors
    from texture.predict.neighbours import Tree
    from texture.predict.tiles import Tiles

__all__ = ["MOST_DENSE", "Rule", "System"]

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Rule = tuple[float, int, int]  # squared radius, least stations, most per sector (0: any)

# All-station mode holds one n x n factor per column: 72 MB at this size.
MOST_DENSE = 3000

# Cells that are sorted and predicted together: bounds the memory beside the results to some 100 MB.
CHUNK = 1 << 21


class System:
    """Stations, tiles and factors for the columns that share them; made by `System.make`."""

    def __init__(
        self,
        columns: list[int],
        rows: Ints,
        stations: Stations,
        extra: Array,
        covariances: list[Covariance],
        means: Array | None,
        neighbours: int | None,
        mode: str,
        drift: str,
    ) -> None:
        from texture.predict.effects import arrange_stations, estimate_effects
        from texture.predict.equations import Models

        self.columns, self.rows, self.mode = columns, rows, mode
        self.covariances = covariances
        self.neighbours = len(rows) if neighbours is None else neighbours
        points = covariances[0].metric(stations.points[rows])
        self._metric = covariances[0].metric
        v, n = len(columns), len(rows)
        values = np.concatenate([stations.values[rows][:, columns, None], extra[rows][:, columns]], axis=2)
        self.value_columns = values.shape[2]
        survey = np.zeros(n, dtype=np.int64) if stations.survey is None else stations.survey[rows]
        own = np.array([c.noise for c in covariances])
        noise = np.ascontiguousarray((stations.noise_variance[rows][:, columns] + own).T)
        values = _average_coincident(points, values, noise, survey, covariances)
        most = max(1, max(len(c.structures) for c in covariances))
        structures = np.zeros((v, most, 4))
        for k, c in enumerate(covariances):
            structures[k, : len(c.structures)] = c.packed
        # Values are kriged as departures from a plain number, so that large means cost no digits.
        # (Laid out so that a column's sum has the same bits whatever stands beside it.)
        own_means = np.ascontiguousarray(values.transpose(1, 2, 0)).mean(axis=2)
        self.centre = own_means if means is None else np.repeat(means[columns, None], values.shape[2], axis=1)
        departures = values - self.centre
        self._drift_centre, self._drift_scale, station_drift = _standardised(stations.drift, rows)
        local = np.empty((n, 0)) if means is not None else np.ones((n, 1))
        wide = np.empty((n, 0))
        if station_drift is not None:
            if drift == "local" or mode == "all":
                local = np.column_stack([local, station_drift])
            else:
                wide = station_drift
        self.wide = wide
        surveys, g = int(survey.max()) + 1, wide.shape[1]
        self.coefficients = np.zeros((v, self.value_columns, g))
        self.offsets = np.zeros((v, self.value_columns, surveys))
        survey_variance, global_covariance = np.array([[c.survey] * surveys for c in covariances]), np.zeros((v, g, g))
        if mode != "all" and means is None:
            # A neighbourhood inside one survey cannot tell that survey's offset from the bed; all stations together
            # can. What is left of the offsets' variance stays with the stations as their survey variance.
            wanted = [k for k, c in enumerate(covariances) if c.survey > 0.0 or g]
            arranged = arrange_stations(points) if wanted else None
            for k in wanted:
                effects = estimate_effects(points, departures[:, k], noise[k], survey, covariances[k], wide, arranged)
                self.coefficients[k], global_covariance[k] = effects.coefficients, effects.covariance
                self.offsets[k], survey_variance[k] = effects.offsets, effects.offset_variance
            departures -= np.einsum("ng,vcg->nvc", wide, self.coefficients)
            departures -= self.offsets.transpose(2, 0, 1)[survey]
        self.drifts = local.shape[1]
        ends = self.drifts + self.value_columns
        station_columns = np.empty((v, n, ends + g))
        station_columns[:, :, : self.drifts] = local
        station_columns[:, :, self.drifts : ends] = departures.transpose(1, 0, 2)
        station_columns[:, :, ends:] = wide
        self.models = Models(
            points, structures, np.array([len(c.structures) for c in covariances], dtype=np.int64),
            np.array([c.small_scale for c in covariances]), survey_variance, noise, survey, station_columns,
            self.drifts, self.value_columns, global_covariance,
        )  # fmt: skip
        self._tiles: Tiles | None = None
        self._tree: Tree | None = None
        self._factors: Factors | None = None

    @classmethod
    def make(
        cls,
        stations: Stations,
        extra: Array,
        covariances: Sequence[Covariance],
        means: Array | None,
        neighbours: int | None,
        mode: str,
        drift: str,
    ) -> list[System]:
        """One system for each set of columns known at the same stations and measured in the same metric.

        `extra` (n, v, c) are further value columns of each coordinate; they share its stations and factors.
        """
        sets: dict[Any, list[int]] = {}
        known = np.isfinite(stations.values)
        for v, c in enumerate(covariances):
            key = (known[:, v].tobytes(), c.anisotropy, c.axis_scales)
            sets.setdefault(key, []).append(v)
        return [
            cls(members, np.flatnonzero(known[:, members[0]]), stations, extra, [covariances[v] for v in members], means,
                neighbours, mode, drift)
            for members in sets.values()
        ]  # fmt: skip

    # ---- prediction -------------------------------------------------------------------------------------------

    def predict(
        self, cells: Array, drift: Array | None, rule: Rule, mean: Array, variance: Array, rung: NDArray[np.int8]
    ) -> Ints:
        """Fill this system's part of mean (m, v, c), variance and rung (m, v).

        Returns counts of repaired neighbourhoods and stations.
        """
        from texture.predict.block import Cells

        repairs = np.zeros(2, dtype=np.int64)
        chunk = max(CHUNK // self.value_columns, CHUNK // 16)
        for begin in range(0, len(cells), chunk):
            part = slice(begin, begin + chunk)
            own = self._metric(cells[part])
            local, wide = self.cell_columns(len(own), None if drift is None else drift[part])
            places = Cells(own, local, wide)
            if len(self.rows) < rule[1]:
                kriged, spread = self._whole_mean(len(own))
                rung[part, self.columns] = 2
            elif self.mode == "tile":
                kriged, spread = self._by_tiles(places, repairs)
            elif self.mode == "all":
                kriged, spread = self._by_all(places, repairs)
            else:
                kriged, spread, fell = self._by_nearest(places, rule, repairs)
                rung[part, self.columns] = fell[:, None]
            kriged += self.centre
            if wide.shape[1]:
                kriged += np.einsum("mg,vcg->mvc", wide, self.coefficients)
            mean[part, self.columns] = kriged
            variance[part, self.columns] = spread
        return repairs

    def support(self, cells: Array, rule: Rule, rung: NDArray[np.int8]) -> None:
        """Fill this system's columns of rung without kriging."""
        if len(self.rows) < rule[1]:
            rung[:, self.columns] = 2
        elif self.mode == "nearest" and (np.isfinite(rule[0]) or rule[2]):
            own = self._metric(cells)
            fell = [len(self._chosen(own[i], rule)) < rule[1] for i in range(len(own))]
            rung[:, self.columns] = np.array(fell, dtype=np.int8)[:, None]

    def served_by(self, place: Array, rule: Rule) -> list[tuple[Ints, float]]:
        """Stations (numbers within this system) that serve one place (1, d), and the weight of what they say.

        More than one set where tiles overlap.
        """
        own = self._metric(place)
        if self.mode == "all" or len(self.rows) < rule[1]:
            return [(np.arange(len(self.rows)), 1.0)]
        if self.mode == "tile":
            _, tile, weight = self.tiles.serving(own)
            return [(self.tiles.stations(t), w) for t, w in zip(tile.tolist(), weight.tolist(), strict=True)]
        chosen = self._chosen(own[0], rule)
        return [(chosen if len(chosen) >= rule[1] else self._chosen(own[0], (np.inf, 1, 0)), 1.0)]

    def _chosen(self, place: Array, rule: Rule) -> Ints:
        from texture.predict.window import choose_nearest

        k = min(self.neighbours, len(self.rows))
        station = np.empty(k, dtype=np.int64)
        return station[: choose_nearest(self._get_tree(), place, k, rule[0], rule[2], station)]

    def cell_columns(self, count: int, drift: Array | None) -> tuple[Array, Array]:
        """Local and global drift columns at cells, scaled as at the stations."""
        constant = np.ones((count, min(1, self.drifts)))
        if drift is None:
            return constant, np.empty((count, 0))
        scaled = (drift - self._drift_centre) / self._drift_scale
        if self.wide.shape[1]:
            return constant, scaled
        return np.column_stack([constant, scaled]), np.empty((count, 0))

    @property
    def tiles(self) -> Tiles:
        """Tiles of these stations, made when first asked for."""
        if self._tiles is None:
            from texture.predict.tiles import build_tiles

            self._tiles = build_tiles(self.models.points, self.neighbours)
        return self._tiles

    def _get_tree(self) -> Tree:
        if self._tree is None:
            from texture.predict.neighbours import build_tree
            from texture.predict.union import LEAF

            self._tree = build_tree(self.models.points, LEAF)
        return self._tree

    def _empty(self, count: int) -> tuple[Array, Array]:
        v = len(self.columns)
        return np.empty((count, v, self.value_columns)), np.empty((count, v))

    def _by_tiles(self, cells: Cells, repairs: Ints) -> tuple[Array, Array]:
        from texture.predict.kernel import krige_tiles
        from texture.predict.overlap import average, count_tiles, list_tiles, sort_by_tile
        from texture.predict.union import capacity

        tiles, places = self.tiles, cells.points
        n = len(places)
        even = np.ones(n, dtype=np.int64)
        many = np.empty(n, dtype=np.int64)
        in_parts_of_equal_cost(
            lambda first, last: count_tiles(tiles.cuts, tiles.boxes, places, first, last, many), even
        )
        begin = np.concatenate([[0], np.cumsum(many)])
        tile, weight = np.empty(begin[-1], dtype=np.int64), np.empty(begin[-1])
        in_parts_of_equal_cost(
            lambda first, last: list_tiles(tiles.cuts, tiles.boxes, places, first, last, begin, tile, weight), even
        )
        start, which, slot = sort_by_tile(len(tiles), begin, tile)
        used = np.flatnonzero(np.diff(start))
        runs = np.append(start[used], start[-1])
        pair_mean, pair_variance = self._empty(len(which))
        most = capacity(self.models.points.shape[1], self.neighbours, len(self.rows))

        def run(first: int, last: int) -> Ints:
            repaired = np.zeros(2, dtype=np.int64)
            krige_tiles(
                self.models, tiles.tree, tiles.boxes, self.neighbours, most, used[first:last], runs[first : last + 1],
                cells, which, pair_mean, pair_variance, repaired,
            )  # fmt: skip
            return repaired

        # A tile costs about what 60 of its cells cost.
        repairs += np.sum(in_parts_of_equal_cost(run, np.diff(runs) + 60), axis=0)
        mean, variance = self._empty(n)
        in_parts_of_equal_cost(
            lambda first, last: average(first, last, begin, slot, weight, pair_mean, pair_variance, mean, variance),
            even,
        )
        return mean, variance

    def _by_nearest(self, cells: Cells, rule: Rule, repairs: Ints) -> tuple[Array, Array, NDArray[np.int8]]:
        from texture.predict.window import krige_nearest

        n = len(cells.points)
        mean, variance = self._empty(n)
        rung = np.zeros(n, dtype=np.int8)

        def run(first: int, last: int) -> Ints:
            repaired = np.zeros(2, dtype=np.int64)
            krige_nearest(
                self.models,
                self._get_tree(),
                cells,
                first,
                last,
                self.neighbours,
                *rule,
                mean,
                variance,
                rung,
                repaired,
            )
            return repaired

        self._get_tree()
        repairs += np.sum(in_parts_of_equal_cost(run, np.ones(n, dtype=np.int64)), axis=0)
        return mean, variance, rung

    def _by_all(self, cells: Cells, repairs: Ints) -> tuple[Array, Array]:
        from texture.predict.kernel import factor_stations, krige_stations

        if self._factors is None:
            self._factors = factor_stations(self.models)
        factors = self._factors
        n = len(cells.points)
        mean, variance = self._empty(n)
        which = np.arange(n)

        def run(first: int, last: int) -> None:
            part = slice(first, last)
            krige_stations(self.models, factors, cells, which[part], mean[part], variance[part])

        in_parts_of_equal_cost(run, np.ones(n, dtype=np.int64))
        redundant = int(factors.redundant.sum())
        repairs += np.array([redundant > 0, redundant])
        return mean, variance

    def station_covariance(self, k: int, rows: Any = slice(None)) -> Array:
        """Covariance of the samples of model k at some stations: of the bed, noise and what is left of survey offsets."""
        from texture.predict.effects import station_covariance

        models = self.models
        return station_covariance(
            self.covariances[k],
            models.points[rows],
            models.noise[k][rows],
            models.survey_variance[k],
            models.survey[rows],
        )

    def _whole_mean(self, count: int) -> tuple[Array, Array]:
        """Generalised least squares mean of the few stations there are, and the bed's variance about it."""
        mean, variance = self._empty(count)
        mean[:], variance[:] = 0.0, 0.0
        for k, c in enumerate(self.covariances):
            covariance = self.station_covariance(k)
            weight = np.linalg.lstsq(covariance, np.ones(len(self.rows)), rcond=None)[0]
            if self.drifts:
                values = self.models.columns[k, :, self.drifts : self.drifts + self.value_columns]
                mean[:, k] = weight @ values / weight.sum()
                variance[:, k] = 1.0 / weight.sum()
            variance[:, k] += c.sill
        return mean, variance


def _standardised(drift: Array | None, rows: Ints) -> tuple[Any, Any, Array | None]:
    """Drift columns centred and scaled at the stations, so that their normal matrix is well conditioned."""
    if drift is None:
        return None, None, None
    own = drift[rows]
    centre, scale = own.mean(axis=0), own.std(axis=0)
    scale = np.where(scale > 0.0, scale, 1.0)
    return centre, scale, (own - centre) / scale


def _average_coincident(
    points: Array, values: Array, noise: Array, survey: Ints, covariances: Sequence[Covariance]
) -> Array:
    """Samples at one place that claim to be exact contradict one another unless equal: each gets their average.

    The kernel then keeps one of them and drops the rest as redundant.
    """
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    from texture.structure.compiled import COINCIDENT_M

    pairs = cKDTree(points).query_pairs(COINCIDENT_M, output_type="ndarray")
    if len(pairs) == 0:
        return values
    values = values.copy()
    for k, c in enumerate(covariances):
        exact = (noise[k, pairs] == 0.0).all(axis=1)
        if c.survey > 0.0:
            exact &= survey[pairs[:, 0]] == survey[pairs[:, 1]]
        i, j = pairs[exact].T
        label = connected_components(coo_array((np.ones(len(i)), (i, j)), shape=(len(points),) * 2), directed=False)[1]
        for own in values[:, k].T:
            own[:] = (np.bincount(label, own) / np.bincount(label))[label]
    return values
