"""Likelihood for more stations than a dense matrix holds: each station given a few of its predecessors.

Vecchia (1988): the joint density is the product of each station's density given all before it; giving each only its
nearest predecessors in an order that goes from coarse to fine loses little (Guinness 2018). Drift and survey offsets
need no predecessors: they are columns that go through the same whitening, survey offsets with a prior (Henderson's
mixed-model equations).
"""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from texture.compiling import compiled
from texture.structure.compiled import add_structures
from texture.structure.likelihood import Family, Parameters
from texture.structure.linear import factor, forward

__all__ = ["Arrangement", "Vecchia", "VecchiaLikelihood", "arrange", "coarse_to_fine", "mixed_model"]

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

PREDECESSORS = 28

# Stations whose conditional densities enter the likelihood: the first ones in order, which know the long distances,
# and a seeded sample of the rest, weighted up to their number.
FIRST, SAMPLED = 600, 3000


def coarse_to_fine(points: Array, seed: int = 0) -> Ints:
    """Order in which stations first cover the whole area thinly and then ever more finely.

    Stands in for the exact max-min order in n log n: on grids of halving cell size each cell that holds no earlier
    station gives one, drawn by seed. Cells of all sizes nest, so a station enters on the first grid on which it is the
    first drawn of its cell; stations sorted along a curve through the nested cells (Morton 1966) tell that in one pass.
    """
    n, d = points.shape
    shuffled = np.random.default_rng(seed).permutation(n)
    drawn = np.empty(n, dtype=np.int64)
    drawn[shuffled] = np.arange(n)
    low, extent = points.min(axis=0), float(np.ptp(points, axis=0).max()) or 1.0
    levels = min(31, 62 // d)
    cell = np.floor((points - low) / extent * 2.0 ** (levels - 1)).astype(np.int64)
    code = np.zeros(n, dtype=np.int64)
    for bit in range(levels):
        for j in range(d):
            code |= (cell[:, j] >> bit & 1) << (bit * d + j)
    curve = np.argsort(code, kind="stable")
    level = np.empty(n, dtype=np.int64)
    level[curve] = _levels(code[curve], drawn[curve], d, levels)
    return np.lexsort((drawn, level))


@compiled
def _levels(code: np.ndarray, drawn: np.ndarray, d: int, levels: int) -> np.ndarray:
    """Grid on which each station along the curve is the first drawn of its cell; `levels` where none is fine enough.

    Shared with the nearest earlier-drawn station on either side, a cell is that station's.
    """
    n = code.size
    level = np.zeros(n, dtype=np.int64)
    before = np.empty(n, dtype=np.int64)
    depth = 0
    for i in range(n):
        while depth > 0 and drawn[before[depth - 1]] > drawn[i]:
            depth -= 1
            level[before[depth]] = max(level[before[depth]], _shared(code[before[depth]] ^ code[i], d, levels))
        if depth > 0:
            level[i] = _shared(code[before[depth - 1]] ^ code[i], d, levels)
        before[depth] = i
        depth += 1
    return level


@compiled
def _shared(difference: int, d: int, levels: int) -> int:
    """Number of grids on which two stations, whose codes differ in these bits, share a cell."""
    shared = levels
    while difference > 0:
        difference >>= d
        shared -= 1
    return shared


def _predecessors(points: Array, order: Ints, wanted: Ints, m: int) -> Ints:
    """Nearest m predecessors of the stations at positions `wanted` of the order (-1 where there are fewer)."""
    from scipy.spatial import cKDTree

    given = np.full((len(wanted), m), -1, dtype=np.int64)
    sorted_points = points[order]
    begin = 0
    while begin < len(wanted):
        # Positions up to twice the first one share a tree: at least half of its stations are predecessors.
        end = int(np.searchsorted(wanted, max(2 * wanted[begin], 64), side="right"))
        last = int(wanted[end - 1])
        tree = cKDTree(sorted_points[: last + 1])
        todo = np.arange(begin, end)
        k = min(last + 1, 3 * m)
        while len(todo):
            near = tree.query(sorted_points[wanted[todo]], k=np.arange(1, k + 1), workers=1)[1]
            before = near < wanted[todo][:, None]
            enough = (before.sum(axis=1) >= m) | (k == last + 1)
            for row, i in zip(near[enough], todo[enough], strict=True):
                own = row[row < wanted[i]][:m]
                given[i, : len(own)] = order[own]
            todo = todo[~enough]
            k = min(last + 1, 3 * k)
        begin = end
    return given


@compiled
def _whiten(
    target: np.ndarray,
    given: np.ndarray,
    weight: np.ndarray,
    points: np.ndarray,
    columns: np.ndarray,
    structures: np.ndarray,
    nugget: np.ndarray,
    gram: np.ndarray,
) -> float:
    """Weighted sum of log conditional variances; adds the whitened columns' products to `gram` (q, q).

    Parameters
    ----------
    target : (c,) stations; given : (c, m) their predecessors, -1 for none; weight : (c,)
    columns : (n, width) drift, surveys, values, padded; nugget : (n,)
    """
    q, width = gram.shape[0], columns.shape[1]
    d = points.shape[1]
    most = (given.shape[1] + 4) // 4 * 4
    u_all, w_all = np.empty(most * most), np.empty(most * width)
    own, dropped = np.empty(most), np.empty(most, dtype=np.bool_)
    member = np.empty(most, dtype=np.int64)
    x, h = np.empty((d, most)), np.empty(most)
    log_variance = 0.0
    for t in range(target.size):
        count = 0
        while count < given.shape[1] and given[t, count] >= 0:
            member[count] = given[t, count]
            count += 1
        member[count] = target[t]
        count += 1
        m = (count + 3) // 4 * 4
        u, w = u_all[: m * m].reshape(m, m), w_all[: m * width].reshape(m, width)
        for i in range(count):
            for a in range(d):
                x[a, i] = points[member[i], a]
        for i in range(m):
            if i >= count:
                for j in range(i, m):
                    u[i, j] = 0.0
                for j in range(width):
                    w[i, j] = 0.0
                u[i, i] = 1.0
                own[i] = 0.0
                continue
            row = h[: count - i]
            for j in range(row.size):
                row[j] = 0.0
            for a in range(d):
                along = x[a, i:count]
                for j in range(row.size):
                    step = along[j] - x[a, i]
                    row[j] += step * step
            for j in range(row.size):
                row[j] = np.sqrt(row[j])
            add_structures(structures, 0.0, row, u[i, i:count])
            u[i, i] += nugget[member[i]]
            for j in range(count, m):
                u[i, j] = 0.0
            own[i] = u[i, i]
            for j in range(width):
                w[i, j] = columns[member[i], j]
        factor(u, own, dropped)
        if dropped[count - 1]:
            continue  # determined by its predecessors: it adds no information
        for i in range(count):
            if dropped[i]:
                for j in range(width):
                    w[i, j] = 0.0
        forward(u, w)
        last = w[count - 1]
        log_variance += weight[t] * 2.0 * np.log(u[count - 1, count - 1])
        for i in range(q):
            f = weight[t] * last[i]
            for j in range(q):
                gram[i, j] += f * last[j]
    return log_variance


@dataclass(frozen=True)
class Arrangement:
    """Which stations' conditionals enter, with what weight, and what each is conditioned on.

    Parameters
    ----------
    target : int array, shape (c,)
    given : int array, shape (c, PREDECESSORS), -1 for none
    weight : float array, shape (c,)
    """

    target: Ints
    given: Ints
    weight: Array


def arrange(points: Array, seed: int = 0, *, all_stations: bool = False) -> Arrangement:
    """Order and predecessors of stations (n, d): of all of them (for estimates) or a weighted sample (for fits)."""
    n = len(points)
    order = coarse_to_fine(points, seed)
    positions = np.arange(n)
    weight = np.ones(n)
    if not all_stations and n > FIRST + SAMPLED:
        sample = np.random.default_rng(seed).choice(np.arange(FIRST, n), SAMPLED, replace=False)
        positions = np.concatenate([np.arange(FIRST), np.sort(sample)])
        weight = np.where(positions < FIRST, 1.0, (n - FIRST) / SAMPLED)
    return Arrangement(order[positions], _predecessors(points, order, positions, PREDECESSORS), weight)


class Vecchia:
    """Columns at stations arranged; whitens them for any covariance.

    Parameters
    ----------
    points : float array, shape (n, d)
    columns : float array, shape (n, q)
        Columns to whiten: drift, then survey indicators, then values.
    arrangement : Arrangement
        Of the same points.
    """

    def __init__(self, points: Array, columns: Array, arrangement: Arrangement) -> None:
        n, q = columns.shape
        self.target, self.given, self.weight = arrangement.target, arrangement.given, arrangement.weight
        self.points, self.q = points, q
        self.columns = np.zeros((n, (q + 15) // 16 * 16))
        self.columns[:, :q] = columns

    def whiten(
        self, structures: Array, nugget: Array, threads: int = 1, points: Array | None = None
    ) -> tuple[float, Array]:
        """Sum of log conditional variances and the products (q, q) of the whitened columns.

        The stations go in 16 fixed pieces whose sums are added in order: the same digits on any number of threads.
        """
        places = self.points if points is None else points  # stretched ones keep order and predecessors
        bounds = np.linspace(0, len(self.target), 17).astype(int)

        def piece(i: int) -> tuple[float, Array]:
            part = slice(bounds[i], bounds[i + 1])
            gram = np.zeros((self.q, self.q))
            total = _whiten(
                self.target[part],
                self.given[part],
                self.weight[part],
                places,
                self.columns,
                structures,
                nugget,
                gram,
            )
            return total, gram

        if threads == 1:
            results = [piece(i) for i in range(16)]
        else:
            with ThreadPoolExecutor(threads) as pool:
                results = list(pool.map(piece, range(16)))
        return float(sum(r[0] for r in results)), np.sum([r[1] for r in results], axis=0)


def mixed_model(gram: Array, drifts: int, survey_variance: float, values: int = 1) -> tuple[Array, Array, float]:
    """Coefficients of drift and survey offsets, their covariance, and the log-determinant of its inverse.

    `gram` holds the products of whitened drift, survey and value columns, the `values` value columns last; the
    coefficients have shape (drifts + surveys, values).
    """
    effects = gram.shape[0] - values
    information = gram[:effects, :effects].copy()
    if information.shape[0] > drifts:
        information[np.arange(drifts, len(information)), np.arange(drifts, len(information))] += 1.0 / survey_variance
    # One at a time: the library's result for many right-hand sides hangs on how many they are.
    solved = [np.linalg.solve(information, np.ascontiguousarray(column)) for column in gram[:effects, effects:].T]
    coefficients = np.column_stack(solved)
    covariance = np.asarray(np.linalg.inv(information), dtype=np.float64)
    return coefficients, covariance, float(np.linalg.slogdet(information)[1])


class VecchiaLikelihood:
    """Restricted log-likelihood as `texture.structure.likelihood.DenseLikelihood`, by Vecchia's product."""

    def __init__(
        self,
        points: Array,
        values: Array,
        noise_variance: Array,
        drift: Array,
        survey: NDArray[np.int64] | None,
        axes: tuple[int, ...],
        arrangement: Arrangement,
    ) -> None:
        self.own_points, self.axes = points, axes
        self.drifts, self.surveys = drift.shape[1], 0 if survey is None else int(survey.max()) + 1
        indicator = np.zeros((len(values), 0)) if survey is None else np.eye(self.surveys)[survey]
        self.noise_variance = noise_variance
        self.vecchia = Vecchia(points, np.column_stack([drift, indicator, values]), arrangement)
        self.evaluations = 0

    @property
    def mean_weight(self) -> float:
        """How many stations each conditional that enters stands for."""
        return float(self.vecchia.weight.mean())

    def _loss(self, family: Family | None, p: Parameters) -> float:
        self.evaluations += 1
        structures = np.empty((0, 4)) if family is None else family.packed(p.range_m, p.sill)
        points = self.own_points if family is None else p.stretched(self.own_points, self.axes)
        log_variance, gram = self.vecchia.whiten(structures, self.noise_variance + p.small_scale, points=points)
        coefficients, _, log_information = mixed_model(gram, self.drifts, p.survey)
        quadratic = gram[-1, -1] - coefficients[:, 0] @ gram[:-1, -1]
        count = self.vecchia.weight.sum()
        extra = self.surveys * np.log(p.survey) if self.surveys else 0.0
        constant = (count - self.drifts) * np.log(2.0 * np.pi)
        return float(0.5 * (log_variance + log_information + extra + quadratic + constant))

    def __call__(self, family: Family | None, parameters: Parameters, gradient: bool = True) -> tuple[float, Array]:
        """Negative restricted log-likelihood and its gradient, laid out as `DenseLikelihood` does.

        The gradient is by central differences: their error (1e-8 of the third derivative) is below the optimiser's.
        """
        from numba import get_num_threads

        slope = np.zeros(4 + len(self.axes))
        if not gradient:
            return self._loss(family, parameters), slope
        wanted = [2] + ([0, 1] if family else []) + ([3] if self.surveys else [])
        wanted += list(range(4, len(slope))) if family else []
        step = 1e-4
        tasks = [parameters] + [parameters.moved(i, sign * step) for i in wanted for sign in (1.0, -1.0)]
        with ThreadPoolExecutor(int(get_num_threads())) as pool:
            losses = list(pool.map(lambda p: self._loss(family, p), tasks))
        for place, i in enumerate(wanted):
            slope[i] = (losses[1 + 2 * place] - losses[2 + 2 * place]) / (2.0 * step)
        return losses[0], slope
