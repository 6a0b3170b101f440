"""What can be told before the work: names, files and drawings that only the grid itself can judge."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError, TextureError
from texture.recipe import Mobility, Recipe, further_recipes
from texture.targets import Target, read_target
from texture.zones import zone_areas

if TYPE_CHECKING:
    from texture.bed import Condition

__all__ = ["Early", "RimInputs", "check_early", "read_rim"]


@dataclass(frozen=True, eq=False)
class RimInputs:
    """Where the rim is, and what files say of it.

    Attributes
    ----------
    weight : float array, shape (n,), or None
        Of `texture.bed.rim.rim_weight`; None without a rim.
    start : bool array, shape (n,), or None
        Cells that the file of `rim.sides` names.
    parent : float array, shape (k, layer, n), or None
        Bed of `rim.parent` in the rim's cells, NaN elsewhere.
    """

    weight: NDArray[np.float64] | None = None
    start: NDArray[np.bool_] | None = None
    parent: NDArray[np.float64] | None = None


@dataclass(frozen=True, eq=False)
class Early:
    """What was read on the cells of a target, kept for the bed.

    Attributes
    ----------
    recipe : Recipe
    target : Target
    rim : RimInputs
    conditions : tuple of Condition
        Waves and currents of the mobility screen.
    further : tuple of Early
        The same of each further target.
    """

    recipe: Recipe
    target: Target
    rim: RimInputs
    conditions: tuple[Condition, ...] = ()
    further: tuple[Early, ...] = ()


def check_early(recipe: Recipe, target: Target) -> Early:
    """Find mistakes in the user's files and names now rather than after the estimate, and keep what was read.

    Raises
    ------
    TextureError
        One of its leaves.
    """
    from texture.ensemble import check_ensemble
    from texture.output import check_outputs

    check_ensemble(recipe)
    check_outputs(target, recipe)
    zone_areas(recipe, target)
    rim = read_rim(recipe, target)
    conditions = tuple(_condition(settings, target) for settings in recipe.mobility)
    names = (further.name for further in recipe.further_targets)
    further = tuple(_further(name, own) for name, own in zip(names, further_recipes(recipe), strict=True))
    return Early(recipe, target, rim, conditions, further)


def _further(name: str, recipe: Recipe) -> Early:
    from texture.output import check_outputs

    try:
        target = read_target(recipe.target)
        check_outputs(target, recipe)
        return Early(recipe, target, read_rim(recipe, target))
    except TextureError as error:
        raise type(error)(f'further_targets "{name}": {error}') from error


def read_rim(recipe: Recipe, target: Target) -> RimInputs:
    """Read what the rim needs from files, and see that it fits on the grid."""
    rim = recipe.rim
    if rim is None:
        return RimInputs()
    from texture.bed.rim import rim_weight
    from texture.output import parent_bed
    from texture.targets.drawn import drawn_cells

    start = drawn_cells(rim.sides, target) if isinstance(rim.sides, Path) else None
    weight = rim_weight(target, rim, start)
    if rim.parent is None:
        return RimInputs(weight, start)
    names = tuple(c.name for c in recipe.bed.classes)
    rimmed = np.flatnonzero(weight > 0.0)
    found = np.full((len(names), len(recipe.bed.layers), target.n_cells), np.nan)
    found[:, :, rimmed] = parent_bed(
        rim.parent, rim.parent_names, names, len(recipe.bed.layers), target.longitude[rimmed], target.latitude[rimmed]
    )
    return RimInputs(weight, start, found)


def _condition(settings: Mobility, target: Target) -> Condition:
    """Read waves and currents onto the target's cells."""
    from texture.bed import Condition
    from texture.bed.mobility import FLUSH_RATIO
    from texture.targets.fields import LENGTH, SPEED, TIME, read_field

    key = f'mobility "{settings.name}", '

    def read(value: float | str | Path, name: str, units: Mapping[str, float]) -> NDArray[np.float64]:
        return read_field(value, settings.file, target, key + name, units, series=True)

    current = read(settings.current_m_s, "current_m_s", SPEED)
    if settings.depth_m is not None:
        depth = read(settings.depth_m, "depth_m", LENGTH)
    elif target.depth_m is not None:
        depth = target.depth_m
    elif (current != 0.0).any():
        raise TargetError(
            f"{key}depth_m: a current needs the depth it flows in, and {target.name} has none; give depth_m"
        )
    else:
        depth = np.full(target.n_cells, np.nan)
    waves = read(settings.orbital_velocity_m_s, "orbital_velocity_m_s", SPEED)
    period = read(1.0 if settings.period_s is None else settings.period_s, "period_s", TIME)
    lengths = {len(values) for values in (waves, period, current, depth) if values.ndim == 2}
    if len(lengths) > 1:
        raise TargetError(
            f"{key}series of {' and '.join(map(str, sorted(lengths)))} times; expected one length for all"
        )
    return Condition(
        name=settings.name,
        orbital_velocity_m_s=waves,
        period_s=period,
        kind=settings.kind or "peak",
        current_m_s=current,
        depth_m=depth,
        angle_deg=settings.angle_deg,
        fair_weather=settings.fair_weather,
        flush_ratio=settings.flush_ratio or FLUSH_RATIO,
        hours=settings.hours or np.nan,
    )
