"""The map: what the method says in each water cell of the target, as an xarray Dataset."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.composition.classes import class_numbers
from texture.progress import Progress
from texture.structure.averaging import averaged_out, sampling_distance_m
from texture.targets import Target, cell_points

if TYPE_CHECKING:
    from texture.mapping import Mapper
    from texture.structure.plane import Plane
    from texture.support import Support
    from texture.zones import Share

__all__ = ["CELLS_AT_ONCE", "Estimate", "estimate_on", "mean_in_cells"]

Floats = NDArray[np.float64]
Singles = NDArray[np.float32]
Heard = list[NDArray[np.bool_]]

QUANTILES = (0.05, 0.5, 0.95)
CELLS_AT_ONCE = 20_000  # bounds the memory of the points inside cells to some tens of megabytes
SUPPORTED, EXTRAPOLATED, GIVEN, WIDER = 1, 2, 5, 6  # of `texture.bed.EVIDENCE`


@dataclass(frozen=True, eq=False)
class Estimate:
    """The map as flat arrays over all cells of the target; NaN (or 0) outside active cells.

    Fractions are in double precision, since they have to sum to one; the rest is rounded to single, which is far finer than it
    is known and halves its memory.

    Attributes
    ----------
    fractions : float array, shape (n, parts)
        Expected mean of each cell.
    quantiles : float array, shape (3, n, parts)
        At 0.05, 0.5 and 0.95, of the cell mean; NaN for methods without a variance.
    mean, variance : float arrays, shape (n, d)
        The kriged columns (log-ratio coordinates, and what else a treatment of zeros maps), averaged over the points
        inside the cell; variance of the bed at a point.
    evidence : int array, shape (n,)
        1 supported by samples, 2 extrapolated, 5 given by the user, 6 wider fall-back; 0 where there is no map.
    texture_class : int array, shape (n,)
        Number of the most probable class in the scheme's own order, from 1; 0 where there is no map.
    class_probability : float array, shape (n,)
    outside : bool array, shape (n,)
        Cells that have too few stations within the radius that the user set; what stands here for them is of the nearest.
    sample_distance_m : float array, shape (n,)
        From the cell's centre to the nearest sample.
    expected_error : float array, shape (n,)
        Root mean square error over the parts that held-out stations as unlike the others as this cell had; NaN where
        none was scored.
    """

    fractions: Floats
    quantiles: Singles
    mean: Singles
    variance: Singles
    evidence: NDArray[np.int8]
    texture_class: NDArray[np.int8]
    class_probability: Singles
    outside: NDArray[np.bool_]
    sample_distance_m: Singles
    expected_error: Singles

    @property
    def within_radius(self) -> Estimate:
        """The map with nothing in cells outside the user's radius but their evidence."""
        if not self.outside.any():
            return self
        emptied: dict[str, Any] = {"texture_class": np.where(self.outside, np.int8(0), self.texture_class)}
        for name in ("fractions", "mean", "variance", "class_probability"):
            emptied[name] = getattr(self, name).copy()
            emptied[name][self.outside] = np.nan
        emptied["quantiles"] = self.quantiles.copy()
        emptied["quantiles"][:, self.outside] = np.nan
        return replace(self, **emptied)


def estimate_on(
    target: Target,
    mapper: Mapper,
    plane: Plane,
    support: Support,
    per_side: int,
    progress: Progress,
    median: bool = False,
    heard: Heard | None = None,
) -> Estimate:
    """Estimate every active cell.

    Parameters
    ----------
    target : Target
    mapper : Mapper
        The fitted method.
    plane : Plane
        From longitude and latitude to the metres that the method was fitted in.
    support : Support
        Cells whose centre is less like every station than its reach are flagged as extrapolated.
    per_side : int
        Points along each side of a cell that its value is averaged over.
    progress : Progress
    median : bool
        Back-transform the kriged coordinates instead of taking expected fractions.
    heard : list of bool array, optional
        With zones: which of `stations` speak in zone 0 (none), 1, 2, ….
    """
    zones = mapper.zones
    cells = np.flatnonzero(target.active)
    parts, d = mapper.logratio.n_parts, len(mapper.column_names)
    n = target.n_cells
    fractions, quantiles = np.full((n, parts), np.nan), np.full((len(QUANTILES), n, parts), np.nan, dtype=np.float32)
    mean, variance = np.full((2, n, d), np.nan, dtype=np.float32)
    evidence, classes = np.zeros(n, dtype=np.int8), np.zeros(n, dtype=np.int8)
    probability, away, error = np.full((3, n), np.nan, dtype=np.float32)
    outside = np.zeros(n, dtype=bool)
    apart_m = sampling_distance_m(support.stations)
    with progress.stage("estimate", total=cells.size) as advance:
        for start in range(0, cells.size, CELLS_AT_ONCE):
            some = cells[start : start + CELLS_AT_ONCE]
            inside = cell_points(target, some, per_side, plane.to_metres)
            shape = inside.shape[:2]
            share = None if zones is None else zones.cells.take(some)
            m, v, rung, guessed = mapper.predict_with_rung(
                inside.reshape(-1, inside.shape[-1]), None if share is None else share.repeat(shape[1])
            )
            back = mapper.back(m) if median else mapper.expected(m, v)
            fractions[some] = mapper.impose(mean_in_cells(back, shape), share)
            m, v = m.reshape(*shape, d).mean(axis=1), v.reshape(*shape, d).mean(axis=1)
            mean[some], variance[some] = m, v
            averaging = averaged_out(np.sqrt(np.nan_to_num(target.area_m2[some])), apart_m)
            quantiles[:, some] = mapper.impose(mapper.cell_quantiles(m, v, QUANTILES, averaging), share)
            classes[some], probability[some] = mapper.likely_class(m, v)
            centre = inside.mean(axis=1)
            away[some], unlike = support.at(centre) if share is None else _by_zone(centre, support, share, heard)
            error[some] = support.curve.at(unlike)
            evidence[some] = np.where(unlike <= support.reach_m, SUPPORTED, EXTRAPOLATED)
            fell_back = rung.reshape(*shape).max(axis=1) > 0
            evidence[some[fell_back | guessed.reshape(*shape).any(axis=1)]] = WIDER
            if share is not None:  # a zone that is filled with a composition or a mean asks no station how near it is
                fell_back &= ~mapper.needs_no_station(share)
            outside[some[fell_back]] = mapper.has_radius
            if zones is not None and share is not None:
                own = zones.is_given(share)
                evidence[some[own]] = GIVEN
                classes[some[own]] = class_numbers(fractions[some[own]])
                probability[some[own]] = np.nan
                mean[some[own]], variance[some[own]] = np.nan, np.nan
            advance(some.size)
    return Estimate(fractions, quantiles, mean, variance, evidence, classes, probability, outside, away, error)


def mean_in_cells(fractions: Floats, shape: tuple[int, int]) -> Floats:
    """Mean of fractions (cells * points, parts) over the points inside each cell, closed; shape (cells, parts)."""
    mean = fractions.reshape(*shape, fractions.shape[-1]).mean(axis=1)
    return np.asarray(mean / mean.sum(axis=1, keepdims=True))


def _by_zone(centre: Floats, support: Support, share: Share, heard: Heard | None) -> tuple[Floats, Floats]:
    """As `Support.at`, of the stations that speak in each cell's zone; NaN where none does."""
    away, unlike = np.full((2, len(centre)), np.nan)
    for number in np.unique(share.zone).tolist():
        some, speak = share.zone == number, support if heard is None else support.among(heard[number])
        if len(speak.stations):
            away[some], unlike[some] = speak.at(centre[some])
    return away, unlike
