"""Further targets: the fit of a run mapped on more grids, each with a bed and files of its own."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from texture.core_layers import core_layers
from texture.errors import RecipeError
from texture.estimate import estimate_on
from texture.hard_ground import hard_ground_probability
from texture.quantities import map_quantities
from texture.result import Result
from texture.targets import points_per_side

if TYPE_CHECKING:
    from texture.clock import Clock
    from texture.early import Early
    from texture.learning import T
    from texture.mapping import Mapper
    from texture.progress import Progress
    from texture.result import Validated
    from texture.targets import Target

__all__ = ["map_further"]


def map_further(found: Validated, further: Sequence[Early], clock: Clock, progress: Progress) -> Mapping[str, Result]:
    """Map the run's fit on each further target and make its bed, by the target's name.

    Nothing is fitted or validated again: structure, method, treatment of zeros, calibration and tested reach are the
    run's. Points inside cells, zones, hard ground and layers from cores are worked out on the target's own cells.

    Parameters
    ----------
    found : Validated
        Of the run's own target.
    further : sequence of Early
        What was read of each.
    clock, progress

    Raises
    ------
    RecipeError
        If a covariate of the map has no value anywhere on a further target.
    """
    made: dict[str, Result] = {}
    with clock.stage("further targets"):
        for settings, early in zip(found.recipe.further_targets, further, strict=True):
            made[settings.name] = _map_one(_moved(found, early, settings.name), early, clock, progress)
    return made


def _map_one(found: Validated, early: Early, clock: Clock, progress: Progress) -> Result:
    from texture.bed import make_bed

    recipe, target, rim = found.recipe, found.target, early.rim
    per_side = points_per_side(recipe.target.points_per_cell, found.cell_side_m, found.range_m)
    estimate = estimate_on(target, found.mapper, found.plane, found.validation.support, per_side,
                           progress, recipe.method.estimate == "median", found.heard)  # fmt: skip
    quantities, cores = map_quantities(found.quantities, target, found.plane, per_side, progress), core_layers(found)
    bed = make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim, recipe.composition.parts,
                   rim.weight, rim.parent, hard_ground=hard_ground_probability(found), cores=cores)  # fmt: skip
    return Result(found, estimate, per_side, None, bed, clock, quantities=quantities, cores=cores, rim=rim)


def _moved(found: Validated, early: Early, name: str) -> Validated:
    """The run's fit with another target in place of its own."""
    recipe = found.recipe.model_copy(
        update={key: getattr(early.recipe, key) for key in ("title", "target", "rim", "mobility", "outputs")}
    )
    wet = early.target.active
    places = found.plane.to_metres(early.target.longitude[wet], early.target.latitude[wet])
    for space in (found.mapper.space, *(q.mapper.space for q in found.quantities)):
        if space.at(places).missing.all():
            used = space.axes or space.columns
            raise RecipeError(
                f'further_targets "{name}": no water cell of {early.target.name} has a value of '
                f"{' and '.join(used.names) if used is not None else 'the covariates'}, which the map follows and which is known "
                "around the run's own target alone; give a covariate file and a [target] that reach there, or a method without"
            )
    return replace(
        found,
        recipe=recipe,
        target=early.target,
        mapper=_on(found.mapper, early.target),
        quantities=tuple(replace(q, mapper=_on(q.mapper, early.target)) for q in found.quantities),
    )


def _on(mapper: Mapper[T], target: Target) -> Mapper[T]:
    """The same method where the zones' shares are those of another target's cells."""
    if mapper.zones is None:
        return mapper
    cells = mapper.zones.at(target.longitude, target.latitude)
    return replace(mapper, zones=replace(mapper.zones, cells=cells))
