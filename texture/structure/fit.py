"""Fitting a covariance: family, range, sill, small-scale variation and survey offsets by restricted likelihood."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.structure.column_correlation import column_correlation, six_digits
from texture.structure.columns import (
    Column,
    check_axes,
    check_groups,
    drift_columns,
    make_column,
    per_column,
    residuals,
)
from texture.structure.covariance import Covariance, CovarianceSet, Structure, check_points
from texture.structure.likelihood import DenseLikelihood, Family, Parameters
from texture.structure.record import Candidate, Fit
from texture.structure.search import STOP_WARM, Search, family_of, parameters_of, warm_parameters
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
    noise = per_column(noise_variance, array.shape)
    extra = drift_columns(drift, len(points))
    labels = None if survey is None else np.unique(np.asarray(survey), return_inverse=True)[1].astype(np.int64)
    axes = check_axes(own_range_axes, points)
    columns = [make_column(points, array[:, v], noise[:, v], extra, labels, v, axes) for v in range(count)]
    sets = check_groups(groups, count)
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
        return CovarianceSet(done, column_correlation(points, array, noise, extra, labels, done, seed))


def one_blas_thread() -> Any:
    """BLAS on one thread: sums in one order, so that a fit is the same on any number of cores."""
    from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]  # ships no annotations

    return threadpool_limits(limits=1, user_api="blas")


def _variograms(column: Column, seed: int, families: Sequence[Family]) -> tuple[EmpiricalVariogram, list[Any]]:
    """Robust variogram of the residuals and a weighted least squares fit for each family, in unit variance."""
    half = column.extent_m / 2.0
    edges = np.linspace(0.0, half, 16)
    survey = column.survey
    v = empirical_variogram(column.plane, residuals(column), edges, "cressie_hawkins", survey, seed)
    return v, [fit_variogram(v, f.model, f.smoothness) for f in families]


def _flat_fit(column: Column) -> Covariance:
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


def _covariance(family: Family | None, p: Parameters, column: Column) -> Covariance:
    """Covariance in the values' own units, rounded to six significant digits."""
    unit = column.scale**2
    structures = []
    scales = None
    if family is not None and column.axes:
        scales = [1.0] * column.points.shape[1]
        for axis, own in zip(column.axes, p.own_ranges, strict=True):
            scales[axis] = six_digits(p.range_m / own)
    if family is not None:
        structures = [Structure(family.model, six_digits(p.sill * unit), six_digits(p.range_m), family.smoothness)]
    return Covariance(
        structures, six_digits(p.small_scale * unit), 0.0, six_digits(p.survey * unit), axis_scales=scales
    )


def _rescaled(covariance: Covariance, column: Column) -> Covariance:
    """A variogram's fit, which knows the plane only, in the values' own units."""
    return _covariance(family_of(covariance), parameters_of(covariance), replace(column, axes=()))


def _by_variogram(column: Column, seed: int, families: Sequence[Family]) -> Covariance:
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


def _dense(column: Column, seed: int) -> DenseLikelihood:
    """Dense likelihood of a column's stations, of a seeded 500 of them where there are more."""
    n = len(column.points)
    take = np.arange(n)
    if n > MOST_DENSE:
        take = np.sort(np.random.default_rng(seed).choice(n, MOST_DENSE, replace=False))
    p = np.ascontiguousarray(column.points[take])
    survey = None if column.survey is None else column.survey[take]
    return DenseLikelihood(p, column.values[take], column.noise_variance[take], column.drift[take], survey, column.axes)


def _by_likelihood(
    columns: list[Column],
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
    search = Search(columns, [_dense(c, seed) for c in columns])
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
        final = Search(columns, whole)
    variograms = [_variograms(c, seed, families) for c in columns]
    tried: list[tuple[Family | None, list[Parameters], float]]
    known = [c for c in warm if c is not None]
    family = next((family_of(c) for c in known if c.structures), None)
    if len(known) == len(columns) and family is not None:
        # A warm start has found its structure: only its size is fitted anew (0.11 s instead of 0.32 s on the demo).
        first = [warm_parameters(c, col) for c, col in zip(known, columns, strict=True)]
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
