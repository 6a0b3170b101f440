"""Columns that share stations and metric, prepared for the compiled kernel and run on threads."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
from numpy.typing import NDArray

from texture.predict.inputs import Stations
from texture.structure.covariance import Covariance

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
        self.columns, self.rows, self.mode = columns, rows, mode
        self.covariances = covariances
        self.neighbours = len(rows) if neighbours is None else neighbours
        self.points = covariances[0].metric(stations.points[rows])
        self._metric = covariances[0].metric
        v, n = len(columns), len(rows)
        values = np.concatenate([stations.values[rows][:, columns, None], extra[rows][:, columns]], axis=2)
        self.value_columns = values.shape[2]
        self.survey = np.zeros(n, dtype=np.int64) if stations.survey is None else stations.survey[rows]
        own = np.array([c.noise for c in covariances])
        self.noise = np.ascontiguousarray((stations.noise_variance[rows][:, columns] + own).T)
        values = _average_coincident(self.points, values, self.noise, self.survey, covariances)
        most = max(1, max(len(c.structures) for c in covariances))
        self.structures = np.zeros((v, most, 4))
        self.structure_count = np.array([len(c.structures) for c in covariances], dtype=np.int64)
        self.small_scale = np.array([c.small_scale for c in covariances])
        for k, c in enumerate(covariances):
            self.structures[k, : len(c.structures)] = c.packed
        # Values are kriged as departures from a plain number, so that large means cost no digits.
        # (Laid out so that a column's sum has the same bits whatever stands beside it.)
        own_means = np.ascontiguousarray(values.transpose(1, 2, 0)).mean(axis=2)
        self.centre = own_means if means is None else np.repeat(means[columns, None], values.shape[2], axis=1)
        departures = values - self.centre
        self._drift_centre, self._drift_scale, station_drift = _standardised(stations.drift, rows)
        self.local = np.empty((n, 0)) if means is not None else np.ones((n, 1))
        wide = np.empty((n, 0))
        if station_drift is not None:
            if drift == "local" or mode == "all":
                self.local = np.column_stack([self.local, station_drift])
            else:
                wide = station_drift
        self.global_columns = wide
        surveys = int(self.survey.max()) + 1
        g = wide.shape[1]
        self.coefficients, self.global_covariance = np.zeros((v, self.value_columns, g)), np.zeros((v, g, g))
        self.offsets = np.zeros((v, self.value_columns, surveys))
        self.survey_variance = np.array([[c.survey] * surveys for c in covariances])
        if mode != "all" and means is None:
            self._take_out_effects(departures)
            departures -= np.einsum("ng,vcg->nvc", wide, self.coefficients)
            departures -= self.offsets.transpose(2, 0, 1)[self.survey]
        self.drifts = self.local.shape[1]
        ends = self.drifts + self.value_columns
        self.station_columns = np.empty((v, n, ends + g))
        self.station_columns[:, :, : self.drifts] = self.local
        self.station_columns[:, :, self.drifts : ends] = departures.transpose(1, 0, 2)
        self.station_columns[:, :, ends:] = self.global_columns
        self._tiles: Any = None
        self._tree: Any = None
        self._factors: list[Any] | None = None

    def _take_out_effects(self, departures: Array) -> None:
        """Estimate global drift and survey offsets from all stations, where there are any.

        A neighbourhood inside one survey cannot tell that survey's offset from the bed; all stations together can.
        What is left of the offsets' variance stays with the stations as their survey variance.
        """
        from texture.predict.effects import estimate_effects

        for k, c in enumerate(self.covariances):
            if c.survey == 0.0 and not self.global_columns.shape[1]:
                continue
            effects = estimate_effects(
                self.points, departures[:, k], self.noise[k], self.survey, c, self.global_columns
            )
            self.coefficients[k], self.global_covariance[k] = effects.coefficients, effects.covariance
            self.offsets[k], self.survey_variance[k] = effects.offsets, effects.offset_variance

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
        repairs = np.zeros(2, dtype=np.int64)
        chunk = max(CHUNK // self.value_columns, CHUNK // 16)
        for begin in range(0, len(cells), chunk):
            part = slice(begin, begin + chunk)
            own = self._metric(cells[part])
            local, wide = self.cell_columns(len(own), None if drift is None else drift[part])
            if len(self.rows) < rule[1]:
                kriged, spread = self._whole_mean(local, wide)
                rung[part, self.columns] = 2
            elif self.mode == "tile":
                kriged, spread = self._by_tiles(own, local, wide, repairs)
            elif self.mode == "all":
                kriged, spread = self._by_all(own, local, wide, repairs)
            else:
                kriged, spread, fell = self._by_nearest(own, local, wide, rule, repairs)
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

    def stations_of(self, place: Array, rule: Rule) -> Ints:
        """Rows of the stations that serve one place (1, d)."""
        own = self._metric(place)
        if self.mode == "all" or len(self.rows) < rule[1]:
            return self.rows
        if self.mode == "tile":
            tiles = self.tiles
            return np.asarray(self.rows[tiles.stations(int(tiles.locate(own)[0]))])
        chosen = self._chosen(own[0], rule)
        if len(chosen) < rule[1]:
            chosen = self._chosen(own[0], (np.inf, 1, 0))
        return self.rows[chosen]

    def _chosen(self, place: Array, rule: Rule) -> Ints:
        from texture.predict.neighbours import DEPTH
        from texture.predict.window import choose_nearest

        k = min(self.neighbours, len(self.rows))
        station = np.empty(k, dtype=np.int64)
        stack, offsets = np.empty(DEPTH, dtype=np.int64), np.empty((DEPTH, self.points.shape[1] + 1))
        nodes, splits, order = self._get_tree()
        count = choose_nearest(self.points, nodes, splits, order, place, k, rule[0], rule[2], stack, offsets, station)
        return station[:count]

    def cell_columns(self, count: int, drift: Array | None) -> tuple[Array, Array]:
        """Local and global drift columns at cells, scaled as at the stations."""
        constant = np.ones((count, min(1, self.drifts)))
        if drift is None:
            return constant, np.empty((count, 0))
        scaled = (drift - self._drift_centre) / self._drift_scale
        if self.global_columns.shape[1]:
            return constant, scaled
        return np.column_stack([constant, scaled]), np.empty((count, 0))

    @property
    def tiles(self) -> Any:
        """Tiles of these stations, made when first asked for."""
        if self._tiles is None:
            from texture.predict.tiles import build_tiles

            self._tiles = build_tiles(self.points, self.neighbours)
        return self._tiles

    def _get_tree(self) -> Any:
        if self._tree is None:
            from texture.predict.neighbours import build_tree
            from texture.predict.tiles import LEAF

            self._tree = build_tree(self.points, LEAF)
        return self._tree

    def _by_tiles(self, cells: Array, local: Array, wide: Array, repairs: Ints) -> tuple[Array, Array]:
        from texture.predict.kernel import krige_tiles
        from texture.predict.tiles import probe_capacity

        tiles = self.tiles
        tile = tiles.locate(cells)
        which = np.argsort(tile, kind="stable")
        used, begins = np.unique(tile[which], return_index=True)
        begins = np.append(begins, len(cells)).astype(np.int64)
        mean, variance = self._empty(len(cells))
        capacity = probe_capacity(self.points.shape[1], self.neighbours, len(self.points))

        def run(first: int, last: int) -> Ints:
            repaired = np.zeros(2, dtype=np.int64)
            krige_tiles(
                used[first:last], begins[first : last + 1], which, cells, local, wide, self.points, tiles.nodes,
                tiles.splits, tiles.order, tiles.low, tiles.high, tiles.own, self.neighbours, capacity,
                self.structures, self.structure_count, self.small_scale, self.survey_variance, self.noise, self.survey, self.station_columns,
                self.drifts, self.global_covariance, mean, variance, repaired,
            )  # fmt: skip
            return repaired

        # A tile costs about what 60 of its cells cost.
        repairs += _on_threads(run, np.diff(begins) + 60)
        return mean, variance

    def _empty(self, count: int) -> tuple[Array, Array]:
        v = len(self.columns)
        return np.empty((count, v, self.value_columns)), np.empty((count, v))

    def _by_nearest(
        self, cells: Array, local: Array, wide: Array, rule: Rule, repairs: Ints
    ) -> tuple[Array, Array, NDArray[np.int8]]:
        from texture.predict.window import krige_nearest

        mean, variance = self._empty(len(cells))
        rung = np.zeros(len(cells), dtype=np.int8)
        nodes, splits, order = self._get_tree()

        def run(first: int, last: int) -> Ints:
            repaired = np.zeros(2, dtype=np.int64)
            krige_nearest(
                first, last, cells, local, wide, self.points, nodes, splits, order, self.neighbours, rule[0], rule[1], rule[2],
                self.structures, self.structure_count, self.small_scale, self.survey_variance, self.noise, self.survey, self.station_columns,
                self.drifts, self.global_covariance, mean, variance, rung, repaired,
            )  # fmt: skip
            return repaired

        repairs += _on_threads(run, np.ones(len(cells), dtype=np.int64))
        return mean, variance, rung

    def _get_factors(self) -> list[Any]:
        if self._factors is None:
            from texture.predict.block import column_width, padded
            from texture.predict.kernel import factor_stations

            n, q = len(self.rows), self.station_columns.shape[2]
            m = padded(n)
            self._factors = []
            for k in range(len(self.columns)):
                u, dropped = np.empty((m, m)), np.empty(m, dtype=np.bool_)
                columns, normal = np.empty((m, column_width(q))), np.zeros((q, max(self.drifts, 1)))
                redundant = factor_stations(
                    self.points, self._nested(k), self.small_scale[k], self.survey_variance[k], self.noise[k],
                    self.survey, self.station_columns[k], self.drifts, u, dropped, columns, normal,
                )  # fmt: skip
                self._factors.append((u, dropped, columns, normal, redundant))
        return self._factors

    def _nested(self, k: int) -> Array:
        return self.structures[k, : self.structure_count[k]]

    def _by_all(self, cells: Array, local: Array, wide: Array, repairs: Ints) -> tuple[Array, Array]:
        from texture.predict.kernel import krige_stations

        mean, variance = self._empty(len(cells))
        for k, (u, dropped, columns, normal, redundant) in enumerate(self._get_factors()):
            one_mean, one_variance = np.empty((len(cells), self.value_columns)), np.empty(len(cells))

            def run(
                first: int, last: int, *, factors: Any = (u, dropped, columns, normal, redundant), k: int = k
            ) -> Ints:
                u, dropped, columns, normal, redundant = factors
                krige_stations(
                    first, last, cells, local, wide, self.points, self._nested(k), self.small_scale[k],
                    self.station_columns.shape[2], u, dropped, redundant, columns, self.drifts, normal,
                    self.global_covariance[k], one_mean, one_variance,  # noqa: B023
                )  # fmt: skip
                return np.zeros(2, dtype=np.int64)

            _on_threads(run, np.ones(len(cells), dtype=np.int64))
            mean[:, k], variance[:, k] = one_mean, one_variance
            repairs += np.array([redundant > 0, redundant])
        return mean, variance

    def _whole_mean(self, local: Array, wide: Array) -> tuple[Array, Array]:
        """Generalised least squares mean of the few stations there are, and the bed's variance about it."""
        mean, variance = self._empty(len(local))
        mean[:], variance[:] = 0.0, 0.0
        for k, c in enumerate(self.covariances):
            covariance = station_covariance(c, self.points, self.noise[k], self.survey_variance[k], self.survey)
            weight = np.linalg.lstsq(covariance, np.ones(len(self.rows)), rcond=None)[0]
            if self.drifts:
                values = self.station_columns[k, :, self.drifts : self.drifts + self.value_columns]
                mean[:, k] = weight @ values / weight.sum()
                variance[:, k] = 1.0 / weight.sum()
            variance[:, k] += c.sill
        return mean, variance


def station_covariance(
    c: Covariance, metric_points: Array, noise: Array, survey_variance: Array, survey: Ints
) -> Array:
    """Covariance of the samples: of the bed, noise and survey offsets (one variance for each survey)."""
    from texture.structure.compiled import covariance_matrix, distance_matrix

    k: Array = covariance_matrix(c.packed, c.small_scale, distance_matrix(metric_points, metric_points))
    k += np.diag(noise)
    if survey_variance.any():
        k += survey_variance[survey] * (survey[:, None] == survey[None, :])
    return k


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


def _on_threads(run: Callable[[int, int], Ints], cost: Ints) -> Ints:
    """Run pieces of about equal cost on threads (the kernel lets go of the interpreter) and add up what they return.

    Each piece writes its own cells only, so the number of threads cannot change a result.
    """
    from numba import get_num_threads

    threads = int(get_num_threads())
    total = np.cumsum(cost)
    if len(cost) == 0:
        return np.zeros(2, dtype=np.int64)
    pieces = 1 if threads == 1 or total[-1] < 2000 else 8 * threads
    ends = np.searchsorted(total, np.linspace(0.0, float(total[-1]), pieces + 1)[1:])
    ends[-1] = len(cost) - 1
    bounds = np.unique(np.concatenate([[0], ends + 1]))
    if len(bounds) == 2:
        return run(0, len(cost))
    with ThreadPoolExecutor(threads) as pool:
        results = list(pool.map(run, bounds[:-1].tolist(), bounds[1:].tolist()))
    return np.asarray(np.sum(results, axis=0))
