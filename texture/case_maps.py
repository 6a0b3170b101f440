"""The maps that the cases of a sensitivity set are made from: refitted, shifted, single members, and the controls."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import ExitStack
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.cases import MapSettings
from texture.errors import RecipeError
from texture.estimate import CELLS_AT_ONCE, mean_in_cells
from texture.learning import columns_in, learn
from texture.mapping import Mapper, make_mapper
from texture.members import draw_members
from texture.progress import Progress
from texture.space import PLANE
from texture.structure.averaging import averaged_out, sampling_distance_m
from texture.targets import cell_points
from texture.treatments import Shares

if TYPE_CHECKING:
    from texture.result import Validated
    from texture.structure import CovarianceSet

__all__ = ["case_maps", "shifted"]

Floats = NDArray[np.float64]
CONTROL_METHODS = {"uniform": "mean", "nearest": "nearest"}
STEP = 1e-4
"""Of the coordinates, for the slope of the mud share: central differences are then right to 1e-8."""


def case_maps(
    found: Validated, per_side: int, wanted: Sequence[MapSettings], scratch: Path, progress: Progress
) -> Iterator[tuple[MapSettings, Floats]]:
    """Make each map that is wanted once; those of one fit one after the other, one map in memory at a time.

    Parameters
    ----------
    found : Validated
    per_side : int
    wanted : sequence of MapSettings
        Without repeats.
    scratch : path
        Folder for scratch files.
    progress : Progress

    Yields
    ------
    settings : MapSettings
    fractions : float array, shape (n, parts)
        NaN outside the water.
    """
    fits: dict[tuple[float | None, float], list[MapSettings]] = {}
    for settings in wanted:
        fits.setdefault((settings.detection_limit, settings.covariance_range), []).append(settings)
    for number, ((limit, stretch), group) in enumerate(fits.items()):
        mapper = _fitted(found, limit, stretch)
        numbers = sorted({s.member for s in group if s.member is not None})
        with ExitStack() as stack:
            place = scratch / str(number)
            place.mkdir()
            maps = None
            if numbers:
                maps = draw_members(
                    found.target, mapper, found.plane, per_side, numbers, found.recipe.seed, place, stack, progress,
                    found.recipe.method.estimate == "median", sampling_distance_m(found.observations.points),
                )  # fmt: skip
            for settings in group:
                if settings.member is not None and maps is not None:
                    yield settings, maps.fractions(settings.member)
                elif settings.control is not None:
                    yield settings, _fractions(found, _control(found, settings.control), per_side, 0.0)
                else:
                    yield settings, _fractions(found, mapper, per_side, settings.shift)


def _fitted(found: Validated, limit: float | None, stretch: float) -> Mapper:
    """The map's method with another limit for zeros, and ranges multiplied."""
    from texture.predict import solves
    from texture.structure import Covariance, CovarianceSet

    method, learned = found.recipe.method, found.validation.learned
    if limit is None and stretch == 1.0:
        return found.mapper
    if limit is not None:
        if isinstance(learned.treatment, Shares):
            raise RecipeError(
                "sensitivity: detection_limit: the map is made from shares, which know no limit; leave it out, or set "
                'composition.zeros = "replace"'
            )
        # A negative number is a factor on the limit that the map's treatment took.
        new = limit if limit > 0.0 else -limit * learned.treatment.limit
        again = learn(learned.treatment.with_limit(new), learned.observations, method, learned.structure, learned.space)
        factors = found.validation.judged.factors if solves(found.validation.method) else None
        learned = again if factors is None else again.calibrated(factors)
    if stretch != 1.0:
        if not solves(found.validation.method):
            raise RecipeError(
                f'sensitivity: covariance_range needs kriging; the best method here was "{found.validation.method}"'
            )
        structure: CovarianceSet = learned.structure
        longer = [
            Covariance(
                [replace(s, range_m=s.range_m * stretch) for s in c.structures], c.small_scale, c.noise, c.survey, c.anisotropy,
                c.axis_scales,
            )
            for c in structure
        ]  # fmt: skip
        learned = replace(learned, structure=CovarianceSet(longer, structure.correlation))
    return replace(found.validation, learned=learned).mapper(found.recipe)


def _control(found: Validated, name: str) -> Mapper:
    """A control in the plane, on the plain treatment."""
    plain = found.validation.plain
    values, noise = columns_in(PLANE, plain.treatment, plain.observations)
    return make_mapper(
        CONTROL_METHODS[name], replace(plain, values=values, noise=noise, space=PLANE), found.recipe.method
    )


def _fractions(found: Validated, mapper: Mapper, per_side: int, shift: float) -> Floats:
    """Fractions of every cell as the estimate makes them, from coordinates that were moved first."""
    target, median = found.target, found.recipe.method.estimate == "median"
    fractions = np.full((target.n_cells, mapper.logratio.n_parts), np.nan)
    averaging = averaged_out(np.sqrt(np.nan_to_num(target.area_m2)), sampling_distance_m(found.observations.points))
    cells = np.flatnonzero(target.active)
    for start in range(0, cells.size, CELLS_AT_ONCE):
        some = cells[start : start + CELLS_AT_ONCE]
        inside = cell_points(target, some, per_side, found.plane.to_metres)
        mean, variance = mapper.predict(inside.reshape(-1, inside.shape[2]))
        if shift and not mapper.integrates:
            raise RecipeError(f'sensitivity: shift needs kriging; the best method here was "{mapper.name}"')
        if shift:
            mean = shifted(mapper, mean, variance, np.repeat(averaging[some], inside.shape[1]), shift)
        back = mapper.back(mean) if median else mapper.expected(mean, variance)
        fractions[some] = mean_in_cells(back, inside.shape[:2])
    return fractions


def shifted(mapper: Mapper, mean: Floats, variance: Floats, averaging: Floats, shift: float) -> Floats:
    """Columns of the map moved so that mud lies `shift` standard deviations higher everywhere; shape (m, k).

    Of all ways to have that, the likeliest: a column that hangs together with mud moves with it. The standard deviation is
    that of a cell mean's coordinate, without what averages out inside the cell.
    """
    spread = mapper.covariance(
        np.maximum(variance - np.minimum(variance, averaging[:, None] * mapper.small_scale), 0.0)
    )
    slope = np.zeros_like(mean)
    for k in range(mapper.logratio.n_coordinates):
        step = np.zeros(mean.shape[1])
        step[k] = STEP
        slope[:, k] = mapper.back(mean + step)[:, 0] - mapper.back(mean - step)[:, 0]
    along = np.einsum("mab,mb->ma", spread, slope)
    size = np.sqrt(np.einsum("ma,ma->m", along, slope))[:, None]
    return np.asarray(mean + shift * np.divide(along, size, out=np.zeros_like(mean), where=size > 0.0))
