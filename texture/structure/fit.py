"""Fitting a covariance: family, range, sill, small-scale variation and survey offsets by restricted likelihood."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.structure.covariance import Covariance, CovarianceSet, Structure, check_points
from texture.structure.likelihood import DenseLikelihood, Family, Parameters
from texture.structure.record import Candidate, Fit
from texture.structure.variogram import EmpiricalVariogram, empirical_variogram, fit_variogram

if TYPE_CHECKING:
    from texture.structure.vecchia import Arrangement, VecchiaLikelihood

__all__ = ["FAMILIES", "fit_covariance"]

Array = NDArray[np.float64]

FAMILIES = (Family("exponential"), Family("matern", 1.5))

# Stations up to which the likelihood is dense; beyond, Vecchia's product (`texture.structure.vecchia`).
MOST_DENSE = 500

# Structure must raise the log-likelihood by this much over none. The two extra parameters are not identified
# without structure, so the usual 1 per parameter finds structure in one noise-only data set in five; this finds it
# in about one in twenty.
LEAST_GAIN = 3.0

# Where the climb ends. From a warm start (inside folds) it ends once a step gains less than 1e-7 of the log-likelihood:
# on the demo, 494 stations in ten folds, this took a build's evaluations from 3,352 to 2,572.
STOP = {"maxiter": 200, "ftol": 1e-12, "gtol": 1e-6}
STOP_WARM = {"maxiter": 200, "ftol": 1e-7, "gtol": 1e-3}

# Prior of log range: mean a third of the extent, standard deviation 1.5 (a factor 4.5), so that it weighs as much as
# a fraction of one station and only decides where the data are silent.
PRIOR_SPREAD = 1.5


@dataclass(frozen=True)
class _Column:
    """One column's own stations, its values scaled to unit variance."""

    points: Array
    values: Array
    noise_variance: Array
    drift: Array
    survey: NDArray[np.int64] | None
    scale: float  # standard deviation that the values were divided by
    extent_m: float
    spacing_m: float
    axes: tuple[int, ...] = ()  # coordinates with their own range

    @property
    def plane(self) -> Array:
        """The coordinates that share one range."""
        return np.ascontiguousarray(np.delete(self.points, list(self.axes), axis=1))

    @property
    def spreads(self) -> Array:
        """Standard deviations of the coordinates with their own range."""
        return np.asarray(self.points[:, list(self.axes)].std(axis=0))


def fit_covariance(
    points: ArrayLike,
    values: ArrayLike,
    method: str = "likelihood",
    noise_variance: ArrayLike | None = None,
    survey: ArrayLike | None = None,
    drift: ArrayLike | None = None,
    groups: Sequence[Sequence[int]] | None = None,
    start: Covariance | CovarianceSet | None = None,
    seed: int = 0,
    families: Sequence[Family] = FAMILIES,
    own_range_axes: Sequence[int] = (),
) -> Covariance | CovarianceSet:
    """Fit a covariance to each column of values and one correlation matrix between the columns.

    Parameters
    ----------
    points : float array, shape (n, d), metres
    values : float array, shape (n,) or (n, v)
        NaN where a column is unknown: each column uses its own stations.
    method : {"likelihood", "variogram"}
        Restricted likelihood, or weighted least squares on a Cressie-Hawkins variogram.
    noise_variance : float array, shape (n,) or (n, v), optional
        Known variance of each value (repeats, kind of analysis, rounding). The fitted remainder is `small_scale`;
        the covariance's `noise` stays 0.
    survey : array, shape (n,), optional
        Label of the survey each station belongs to; its offset is fitted as a random effect.
    drift : float array, shape (n, p), optional
        Drift columns without the constant, which is always there.
    groups : lists of column numbers, optional
        Columns that share one range and one family; by default each column has its own.
    start : Covariance or CovarianceSet, optional
        Warm start: its families are kept and the search begins at its parameters, once.
    seed : int
        Draws the stations or pairs where there are too many to use all.
    families : sequence of Family
        Models to choose from by likelihood.
    own_range_axes : sequence of int
        Coordinates that are covariates (depth, distance to shore ...) rather than places: each gets its own range by
        likelihood, and the covariance's `axis_scales` say how many metres one unit of it counts for. A covariate that
        tells nothing ends with a range of many standard deviations.

    Returns
    -------
    Covariance for values (n,), CovarianceSet for values (n, v)
        Parameters are rounded to six significant digits. Each has a `fit_record`. Flat values and values without
        spatial structure give a covariance with small-scale variation alone, and the record's notes say so.

    Raises
    ------
    StructureError
        Fewer than 3 stations in a column, shapes that disagree, negative noise variance.
    """
    points = check_points(points)
    array = np.asarray(values, dtype=np.float64)
    flat = array.ndim == 1
    array = array[:, None] if flat else array
    if array.ndim != 2 or array.shape[0] != len(points):
        raise StructureError(f"values: found shape {array.shape}, expected ({len(points)}, v) as there are points")
    count = array.shape[1]
    noise = _per_column(noise_variance, array.shape)
    extra = _drift_columns(drift, len(points))
    labels = None if survey is None else np.unique(np.asarray(survey), return_inverse=True)[1].astype(np.int64)
    axes = _check_axes(own_range_axes, points)
    columns = [_column(points, array[:, v], noise[:, v], extra, labels, v, axes) for v in range(count)]
    sets = _check_groups(groups, count)
    if method not in ("likelihood", "variogram"):
        raise StructureError(f"method: found {method!r}, expected likelihood or variogram")
    if method == "variogram" and axes:
        raise StructureError("own_range_axes: own ranges are fitted by likelihood; a variogram knows one distance only")
    warm = [start] * count if isinstance(start, Covariance) else list(start) if start is not None else [None] * count
    fitted: list[Covariance | None] = [None] * count
    arranged: dict[bytes, Arrangement] = {}
    with one_blas_thread():
        for members in sets:
            own = [columns[v] for v in members]
            if method == "variogram":
                results = [_by_variogram(c, seed, families) for c in own]
            else:
                results = _by_likelihood(own, [warm[v] for v in members], seed, families, arranged)
            for v, covariance in zip(members, results, strict=True):
                fitted[v] = covariance
        done = [c for c in fitted if c is not None]
        if flat:
            return done[0]
        return CovarianceSet(done, _column_correlation(points, array, noise, extra, labels, done, seed))


def one_blas_thread() -> Any:
    """BLAS on one thread: sums in one order, so that a fit is the same on any number of cores."""
    from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]  # ships no annotations

    return threadpool_limits(limits=1, user_api="blas")


def _per_column(noise_variance: ArrayLike | None, shape: tuple[int, ...]) -> Array:
    if noise_variance is None:
        return np.zeros(shape)
    noise = np.asarray(noise_variance, dtype=np.float64)
    if noise.ndim == 1:
        noise = noise[:, None]
    try:
        noise = np.broadcast_to(noise, shape)
    except ValueError as error:
        raise StructureError(f"noise_variance: found shape {noise.shape}, expected {shape} or ({shape[0]},)") from error
    if (noise < 0).any():
        row = int(np.argmax((noise < 0).any(axis=1)))
        raise StructureError(f"noise_variance: row {row} is negative; a variance is 0 or more")
    return noise


def _drift_columns(drift: ArrayLike | None, n: int) -> Array:
    if drift is None:
        return np.ones((n, 1))
    columns = np.asarray(drift, dtype=np.float64).reshape(n, -1)
    if not np.isfinite(columns).all():
        row = int(np.argmax(~np.isfinite(columns).all(axis=1)))
        raise StructureError(f"drift: row {row} is not a finite number; fill it or leave the station out")
    # Standardised, so that the drift's information matrix is well conditioned whatever the units.
    spread = columns.std(axis=0)
    return np.column_stack([np.ones(n), (columns - columns.mean(axis=0)) / np.where(spread > 0, spread, 1.0)])


def _check_axes(axes: Sequence[int], points: Array) -> tuple[int, ...]:
    own = tuple(int(a) for a in axes)
    d = points.shape[1]
    if len(set(own)) != len(own) or any(not 0 <= a < d for a in own) or (own and len(own) == d):
        raise StructureError(f"own_range_axes: found {own}, expected some, not all, of the coordinates 0 to {d - 1}")
    for a in own:
        if np.ptp(points[:, a]) == 0.0:
            raise StructureError(f"own_range_axes: coordinate {a} is the same at all stations; leave it out")
    return own


def _check_groups(groups: Sequence[Sequence[int]] | None, count: int) -> list[list[int]]:
    if groups is None:
        return [[v] for v in range(count)]
    sets = [list(g) for g in groups]
    if sorted(v for g in sets for v in g) != list(range(count)):
        raise StructureError(f"groups: found {sets}, expected each of the columns 0 to {count - 1} exactly once")
    return sets


def _column(
    points: Array, values: Array, noise: Array, drift: Array, labels: Any, number: int, axes: tuple[int, ...]
) -> _Column:
    from scipy.spatial import cKDTree

    known = np.flatnonzero(np.isfinite(values) & np.isfinite(noise))
    if len(known) < 3:
        raise StructureError(f"column {number}: found {len(known)} stations with a value, expected at least 3 to fit")
    own, z = points[known], values[known]
    survey = None if labels is None else np.unique(labels[known], return_inverse=True)[1].astype(np.int64)
    if survey is not None and survey.max() == 0:
        survey = None  # one survey has no offset against itself
    plane = np.delete(own, list(axes), axis=1)
    extent = float(np.linalg.norm(np.ptp(plane, axis=0)))
    near = cKDTree(plane).query(plane, k=2)[0][:, 1]
    spacing = float(np.median(near[near > 0])) if (near > 0).any() else 0.0
    scale = float(z.std())
    # Equal values leave rounding noise in their standard deviation.
    if scale <= 1e-12 * max(1.0, float(np.abs(z).max())) or extent == 0.0:
        scale = 0.0
    unit = scale or 1.0
    return _Column(
        own, (z - z.mean()) / unit, noise[known] / unit**2, drift[known], survey, scale, extent, spacing, axes
    )


def _residuals(column: _Column) -> Array:
    coefficients = np.linalg.lstsq(column.drift, column.values, rcond=None)[0]
    residual: Array = column.values - column.drift @ coefficients
    return residual


def _variograms(column: _Column, seed: int, families: Sequence[Family]) -> tuple[EmpiricalVariogram, list[Any]]:
    """Robust variogram of the residuals and a weighted least squares fit for each family, in unit variance."""
    half = column.extent_m / 2.0
    edges = np.linspace(0.0, half, 16)
    survey = column.survey
    v = empirical_variogram(column.plane, _residuals(column), edges, "cressie_hawkins", survey, seed)
    return v, [fit_variogram(v, f.model, f.smoothness) for f in families]


def _flat_fit(column: _Column) -> Covariance:
    # Any positive number gives the same map; a tiny one keeps its intervals honest.
    tiny = 1e-12
    c = Covariance([], small_scale=tiny)
    empty = EmpiricalVariogram(np.array([column.extent_m]), np.zeros(1), np.zeros(1, dtype=np.int64), "none")
    note = "all values are equal (or all stations lie at one place): no spatial structure can be fitted"
    name = "no structure"
    record = Fit("likelihood", name, (Candidate(name, c, float("nan")),), empty, c, len(column.points), 0, (note,))
    return replace_record(c, record)


def replace_record(covariance: Covariance, record: Fit | None) -> Covariance:
    """The same covariance with another fit record."""
    c = covariance
    return Covariance(c.structures, c.small_scale, c.noise, c.survey, c.anisotropy, c.axis_scales, record)


def _six_digits(value: float) -> float:
    return float(f"{value:.6g}")


def _covariance(family: Family | None, p: Parameters, column: _Column) -> Covariance:
    """Covariance in the values' own units, rounded to six significant digits."""
    unit = column.scale**2
    structures = []
    scales = None
    if family is not None and column.axes:
        scales = [1.0] * column.points.shape[1]
        for axis, own in zip(column.axes, p.own_ranges, strict=True):
            scales[axis] = _six_digits(p.range_m / own)
    if family is not None:
        structures = [Structure(family.model, _six_digits(p.sill * unit), _six_digits(p.range_m), family.smoothness)]
    return Covariance(
        structures, _six_digits(p.small_scale * unit), 0.0, _six_digits(p.survey * unit), axis_scales=scales
    )


def _rescaled(covariance: Covariance, column: _Column) -> Covariance:
    """A variogram's fit, which knows the plane only, in the values' own units."""
    return _covariance(_family_of(covariance), _parameters_of(covariance), replace(column, axes=()))


def _family_of(c: Covariance) -> Family | None:
    return Family(c.structures[0].model, c.structures[0].smoothness) if c.structures else None


def _parameters_of(c: Covariance) -> Parameters:
    if not c.structures:
        return Parameters(0.0, 0.0, c.small_scale, c.survey)
    return Parameters(c.structures[0].range_m, c.structures[0].sill, c.small_scale, c.survey)


def _by_variogram(column: _Column, seed: int, families: Sequence[Family]) -> Covariance:
    if column.scale == 0.0:
        return _flat_fit(column)
    v, fits = _variograms(column, seed, families)
    best = int(np.argmin([loss for _, loss in fits]))
    candidates = tuple(
        Candidate(f.name, _rescaled(c, column), float("nan")) for f, (c, _) in zip(families, fits, strict=True)
    )
    chosen = candidates[best]
    notes = () if chosen.covariance.structures else ("the variogram does not rise: no spatial structure found",)
    record = Fit(
        "variogram",
        chosen.name,
        candidates,
        _scaled_variogram(v, column.scale),
        chosen.covariance,
        len(column.points),
        0,
        notes,
    )
    return replace_record(chosen.covariance, record)


def _scaled_variogram(v: EmpiricalVariogram, scale: float) -> EmpiricalVariogram:
    return replace(v, semivariance=v.semivariance * scale**2)


def _dense(column: _Column, seed: int) -> DenseLikelihood:
    """Dense likelihood of a column's stations, of a seeded 500 of them where there are more."""
    n = len(column.points)
    take = np.arange(n)
    if n > MOST_DENSE:
        take = np.sort(np.random.default_rng(seed).choice(n, MOST_DENSE, replace=False))
    p = np.ascontiguousarray(column.points[take])
    survey = None if column.survey is None else column.survey[take]
    return DenseLikelihood(p, column.values[take], column.noise_variance[take], column.drift[take], survey, column.axes)


def _by_likelihood(
    columns: list[_Column],
    warm: list[Covariance | None],
    seed: int,
    families: Sequence[Family],
    arranged: dict[bytes, Arrangement],
) -> list[Covariance]:
    """Fit the columns of one group, which share range and family; `arranged` keeps what columns of equal stations share."""
    flat = [c.scale == 0.0 for c in columns]
    if any(flat):
        rest = [i for i, f in enumerate(flat) if not f]
        results = [_flat_fit(c) for c in columns]
        if rest:
            others = _by_likelihood([columns[i] for i in rest], [warm[i] for i in rest], seed, families, arranged)
            for i, covariance in zip(rest, others, strict=True):
                results[i] = covariance
        return results
    search = _Search(columns, [_dense(c, seed) for c in columns])
    # Beyond what a dense matrix holds, the dense search on a subset only finds where Vecchia's starts.
    final = search
    if max(len(c.points) for c in columns) > MOST_DENSE:
        from texture.structure.vecchia import VecchiaLikelihood, arrange

        whole: list[VecchiaLikelihood] = []
        for c in columns:
            key = c.points.tobytes()
            if key not in arranged:
                arranged[key] = arrange(c.points, seed)
            whole.append(
                VecchiaLikelihood(c.points, c.values, c.noise_variance, c.drift, c.survey, c.axes, arranged[key])
            )
        final = _Search(columns, whole)
    variograms = [_variograms(c, seed, families) for c in columns]
    tried: list[tuple[Family | None, list[Parameters], float]]
    known = [c for c in warm if c is not None]
    family = next((_family_of(c) for c in known if c.structures), None)
    if len(known) == len(columns) and family is not None:
        # A warm start has found its structure: only its size is fitted anew (0.11 s instead of 0.32 s on the demo).
        first = [_warm_parameters(c, col) for c, col in zip(known, columns, strict=True)]
        final.stop = STOP_WARM
        tried = [(family, *final.climb(family, first))]
    else:
        tried = [(None, *final.without_structure())]
    if len(known) < len(columns):
        for number, family in enumerate(families):
            starts = search.starts(family, [fits[number][0] for _, fits in variograms])
            found = [search.climb(family, s) for s in starts]
            best = min(found, key=lambda item: item[1])
            tried.append((family, *(best if final is search else final.climb(family, best[0]))))
    structured = min(tried[1:], key=lambda item: item[2], default=tried[0])
    # Where a sample of stations stands for all, so does its chance fit.
    least = LEAST_GAIN * sum(x.mean_weight for x in final.likelihoods)
    chosen = structured if tried[0][2] - structured[2] > least else tried[0]
    results = []
    for i, column in enumerate(columns):
        candidates = tuple(
            Candidate(f.name if f else "no structure", _covariance(f, p[i], column), -loss) for f, p, loss in tried
        )
        name = chosen[0].name if chosen[0] else "no structure"
        notes = (
            [] if chosen[0] else ["no spatial structure found: the values vary as noise does, the map is their mean"]
        )
        v, fits = variograms[i]
        index = next((k for k, f in enumerate(families) if f == chosen[0]), 0)
        covariance = next(c.covariance for c in candidates if c.name == name)
        record = Fit(
            "likelihood",
            name,
            candidates,
            _scaled_variogram(v, column.scale),
            _rescaled(fits[index][0], column),
            len(column.points),
            search.evaluations + (0 if final is search else final.evaluations),
            tuple(notes),
        )
        results.append(replace_record(covariance, record))
    return results


def _warm_parameters(covariance: Covariance, column: _Column) -> Parameters:
    p, unit = _parameters_of(covariance), column.scale**2
    own = tuple(2.0 * column.spreads)
    if not covariance.structures:
        return Parameters(column.extent_m / 3.0, 0.2, p.small_scale / unit, p.survey / unit, own)
    if covariance.axis_scales is not None:
        own = tuple(p.range_m / covariance.axis_scales[a] for a in column.axes)
    return Parameters(p.range_m, p.sill / unit, p.small_scale / unit, p.survey / unit, own)


class _Search:
    """Bounded quasi-Newton search over log range (shared) and each column's log variances."""

    def __init__(self, columns: list[_Column], likelihoods: Sequence[DenseLikelihood | VecchiaLikelihood]) -> None:
        self.columns, self.likelihoods = columns, likelihoods
        self.stop: dict[str, float] = STOP
        self.extent = max(c.extent_m for c in columns)
        self.spacing = min((c.spacing_m for c in columns if c.spacing_m > 0), default=self.extent / 100.0)
        self.range_prior = np.log(self.extent / 3.0)
        # Own ranges: two standard deviations of the covariate as a first guess, within a factor of 20.
        self.own_prior = np.log(2.0 * columns[0].spreads)
        # A range far below the spacing is noise, far above the extent a trend: neither can be told from the data.
        self.bounds_range = (np.log(0.5 * self.spacing), np.log(5.0 * self.extent))

    @property
    def evaluations(self) -> int:
        """Likelihood evaluations so far, over all columns."""
        return sum(x.evaluations for x in self.likelihoods)

    def _unpack(self, theta: Array, structured: bool) -> list[Parameters]:
        e = np.exp(theta)
        if structured:
            own = tuple(e[1 + 3 * len(self.columns) :].tolist())
            return [Parameters(e[0], e[1 + 3 * i], e[2 + 3 * i], e[3 + 3 * i], own) for i in range(len(self.columns))]
        return [Parameters(0.0, 0.0, e[2 * i], e[2 * i + 1]) for i in range(len(self.columns))]

    def _loss(self, theta: Array, family: Family | None, gradient: bool = True) -> tuple[float, Array]:
        total, slope = 0.0, np.zeros_like(theta)
        for i, (p, likelihood) in enumerate(
            zip(self._unpack(theta, family is not None), self.likelihoods, strict=True)
        ):
            loss, by = likelihood(family, p, gradient)
            total += loss
            if family is not None:
                slope[0] += by[0]
                slope[1 + 3 * i : 4 + 3 * i] += by[1:4]
                slope[1 + 3 * len(self.columns) :] += by[4:]
            else:
                slope[2 * i : 2 * i + 2] += by[2:4]
        return total, slope

    def _penalised(self, theta: Array, family: Family | None) -> tuple[float, Array]:
        total, slope = self._loss(theta, family)
        if family is not None:
            away = (theta[0] - self.range_prior) / PRIOR_SPREAD
            total += 0.5 * away**2
            slope[0] += away / PRIOR_SPREAD
            own = slice(1 + 3 * len(self.columns), None)
            beside = (theta[own] - self.own_prior) / PRIOR_SPREAD
            total += 0.5 * float(beside @ beside)
            slope[own] += beside / PRIOR_SPREAD
        return total, slope

    def _minimise(self, theta: Array, family: Family | None, bounds: list[tuple[float, float]]) -> tuple[Any, float]:
        from scipy.optimize import minimize

        low, high = np.array(bounds).T
        found = minimize(
            self._penalised,
            np.clip(theta, low, high),
            (family,),
            "L-BFGS-B",
            jac=True,
            bounds=bounds,
            options=self.stop,
        )
        loss = self._loss(found.x, family, gradient=False)[0]
        return self._settle(found.x, family is not None), loss

    def _settle(self, theta: Array, structured: bool) -> list[Parameters]:
        """Variances at their floor are zero."""
        return [
            replace(
                p,
                small_scale=0.0 if p.small_scale < 2e-6 and structured else p.small_scale,
                survey=0.0 if p.survey < 2e-6 else p.survey,
            )
            for p in self._unpack(theta, structured)
        ]

    def _survey_bounds(self, column: _Column) -> tuple[float, float]:
        return (np.log(1e-6), np.log(10.0)) if column.survey is not None else (np.log(1e-12),) * 2

    def climb(self, family: Family, start: list[Parameters]) -> tuple[list[Parameters], float]:
        """Best parameters from one start and their negative log-likelihood (without the prior)."""
        theta, bounds = [np.log(start[0].range_m)], [self.bounds_range]
        for p, column in zip(start, self.columns, strict=True):
            theta += [np.log(max(v, 1e-12)) for v in (p.sill, p.small_scale, p.survey)]
            bounds += [(np.log(1e-4), np.log(100.0)), (np.log(1e-6), np.log(10.0)), self._survey_bounds(column)]
        theta += np.log(start[0].own_ranges).tolist()
        bounds += [(middle - np.log(20.0), middle + np.log(20.0)) for middle in self.own_prior]
        return self._minimise(np.array(theta), family, bounds)

    def without_structure(self) -> tuple[list[Parameters], float]:
        """Best parameters where every station stands alone."""
        theta, bounds = [], []
        for column in self.columns:
            theta += [np.log(0.9), np.log(0.1 if column.survey is not None else 1e-12)]
            bounds += [(np.log(1e-6), np.log(10.0)), self._survey_bounds(column)]
        return self._minimise(np.array(theta), None, bounds)

    def starts(self, family: Family, variogram_fits: list[Covariance]) -> list[list[Parameters]]:
        """The two best of a coarse grid of ranges and small-scale shares, and the robust variogram's fit."""
        own = tuple(np.exp(self.own_prior).tolist())
        ranges = np.geomspace(max(2.0 * self.spacing, 0.01 * self.extent), 1.5 * self.extent, 5)
        grid = []
        for range_m in ranges:
            for share in (0.05, 0.3, 0.7):
                s = [0.1 if c.survey is not None else 0.0 for c in self.columns]
                grid.append([Parameters(range_m, 1.0 - share, share, x, own) for x in s])
        if all(c.structures for c in variogram_fits):
            first = [_parameters_of(c) for c in variogram_fits]
            shared = float(np.exp(np.mean([np.log(p.range_m) for p in first])))
            grid.append(
                [
                    replace(p, range_m=shared, survey=s.survey, own_ranges=own)
                    for p, s in zip(first, grid[0], strict=True)
                ]
            )
        losses = []
        for item in grid:
            losses.append(sum(f(family, p, False)[0] for f, p in zip(self.likelihoods, item, strict=True)))
        return [grid[k] for k in np.argsort(losses, kind="stable")[:2]]


def _column_correlation(
    points: Array, values: Array, noise: Array, drift: Array, labels: Any, fitted: list[Covariance], seed: int
) -> Array:
    """Correlation between columns of residuals whitened by each column's own covariance.

    Where all columns follow one correlation model this is the maximum likelihood estimate of the correlation of an
    intrinsic coregionalisation (Wackernagel 2003); elsewhere it is the correlation of the kriging errors. Only
    stations that know both columns enter, a seeded 500 of them where there are more.
    """
    count = values.shape[1]
    result = np.eye(count)
    rng = np.random.default_rng(seed)
    for a in range(count):
        for b in range(a):
            both = np.flatnonzero(np.isfinite(values[:, a]) & np.isfinite(values[:, b]))
            if len(both) < 10:
                continue  # a correlation from fewer says nothing
            if len(both) > MOST_DENSE:
                both = np.sort(rng.choice(both, MOST_DENSE, replace=False))
            survey = None if labels is None else labels[both]
            white = [
                _whitened(points[both], values[both, v], noise[both, v], drift[both], survey, fitted[v]) for v in (a, b)
            ]
            spread = np.sqrt((white[0] @ white[0]) * (white[1] @ white[1]))
            if spread > 0:
                result[a, b] = result[b, a] = _six_digits(float(np.clip(white[0] @ white[1] / spread, -0.999, 0.999)))
    return _nearest_correlation(result)


def _whitened(points: Array, values: Array, noise: Array, drift: Array, survey: Any, c: Covariance) -> Array:
    from scipy.linalg import cholesky, solve_triangular

    k = c.matrix(points) + np.diag(noise + c.noise + 1e-9 * c.sill)
    if survey is not None:
        k += c.survey * (survey[:, None] == survey[None, :])
    factor = cholesky(k, lower=True)
    white = solve_triangular(factor, np.column_stack([drift, values]), lower=True)
    design, z = white[:, :-1], white[:, -1]
    residual: Array = z - design @ np.linalg.lstsq(design, z, rcond=None)[0]
    return residual


def _nearest_correlation(matrix: Array) -> Array:
    """Lift negative eigenvalues (pairs were estimated apart) and put ones back on the diagonal."""
    value, vector = np.linalg.eigh(matrix)
    if value.min() >= 1e-6:
        return matrix
    lifted = (vector * np.maximum(value, 1e-6)) @ vector.T
    d = np.sqrt(np.diag(lifted))
    lifted = lifted / d[:, None] / d[None, :]
    result: Array = 0.5 * (lifted + lifted.T)
    np.fill_diagonal(result, 1.0)
    return result
