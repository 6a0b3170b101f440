"""The search for the parameters of greatest restricted likelihood: where it starts, climbs, and may not go."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.structure.columns import Column
from texture.structure.covariance import Covariance
from texture.structure.likelihood import DenseLikelihood, Family, Parameters

if TYPE_CHECKING:
    from texture.structure.vecchia import VecchiaLikelihood

__all__ = ["STOP_WARM", "Search", "family_of", "parameters_of", "warm_parameters"]

Array = NDArray[np.float64]

# Where the climb ends. From a warm start (inside folds) it ends once a step gains less than 1e-7 of the log-likelihood:
# on the demo, 494 stations in ten folds, this took a build's evaluations from 3,352 to 2,572.
STOP = {"maxiter": 200, "ftol": 1e-12, "gtol": 1e-6}
STOP_WARM = {"maxiter": 200, "ftol": 1e-7, "gtol": 1e-3}

# Prior of log range: mean a third of the extent, standard deviation 1.5 (a factor 4.5), so that it weighs as much as
# a fraction of one station and only decides where the data are silent.
PRIOR_SPREAD = 1.5


def family_of(c: Covariance) -> Family | None:
    """Family of the first structure, None without one."""
    return Family(c.structures[0].model, c.structures[0].smoothness) if c.structures else None


def parameters_of(c: Covariance) -> Parameters:
    """Parameters of a covariance of one structure, in its own units."""
    if not c.structures:
        return Parameters(0.0, 0.0, c.small_scale, c.survey)
    return Parameters(c.structures[0].range_m, c.structures[0].sill, c.small_scale, c.survey)


def warm_parameters(covariance: Covariance, column: Column) -> Parameters:
    """A covariance as the start of a search: in units of the column's variance."""
    p, unit = parameters_of(covariance), column.scale**2
    own = tuple(2.0 * column.spreads)
    if not covariance.structures:
        return Parameters(column.extent_m / 3.0, 0.2, p.small_scale / unit, p.survey / unit, own)
    if covariance.axis_scales is not None:
        own = tuple(p.range_m / covariance.axis_scales[a] for a in column.axes)
    return Parameters(p.range_m, p.sill / unit, p.small_scale / unit, p.survey / unit, own)


class Search:
    """Bounded quasi-Newton search over log range (shared) and each column's log variances."""

    def __init__(self, columns: list[Column], likelihoods: Sequence[DenseLikelihood | VecchiaLikelihood]) -> None:
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

    def _survey_bounds(self, column: Column) -> tuple[float, float]:
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
            first = [parameters_of(c) for c in variogram_fits]
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
