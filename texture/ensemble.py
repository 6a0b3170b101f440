"""The ensemble of a build: members drawn, summed up, and kept on disk until they are written."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from texture.errors import RecipeError
from texture.member_summary import summarise_members
from texture.members import MemberMaps, draw_members
from texture.progress import Progress
from texture.recipe import Recipe
from texture.structure.averaging import sampling_distance_m

if TYPE_CHECKING:
    from texture.bed import Bed
    from texture.output import ResultFolder
    from texture.result import Result

__all__ = ["check_ensemble", "drawn_ensemble", "write_ensemble"]


def check_ensemble(recipe: Recipe) -> None:
    """Refuse members of a method without a variance, before the work; raises `RecipeError`."""
    from texture.predict import solves

    if recipe.ensemble.members and not solves(recipe.method.tried_with):
        raise RecipeError(
            f'ensemble.members = {recipe.ensemble.members}: members are drawn by kriging, and method.name = "{recipe.method.name}" is none; '
            'use "kriging"'
        )


@contextmanager
def drawn_ensemble(
    result: Result, folder: ResultFolder, progress: Progress
) -> Iterator[tuple[Result, MemberMaps | None]]:
    """Draw the members that the recipe asks for; inside the block their maps can be read.

    Yields
    ------
    result : Result
        With what the members say together.
    maps : MemberMaps, or None where the recipe asks for none
    """
    found, settings = result.found, result.found.recipe.ensemble
    if settings.members == 0:
        yield result, None
        return
    with folder.scratch() as scratch, ExitStack() as stack:
        with result.clock.stage("members"):
            maps = draw_members(
                found.target, found.mapper, found.plane, result.points_per_side, range(1, settings.members + 1),
                found.recipe.seed, scratch, stack, progress, found.recipe.method.estimate == "median", sampling_distance_m(found.observations.points),
            )  # fmt: skip
            summary = summarise_members(
                maps, found.recipe.composition.parts, settings.quantiles, settings.above, found.mapper.treatment.trace
            )
        yield replace(result, members=summary), maps


def write_ensemble(result: Result, maps: MemberMaps, aside: Path) -> None:
    """Write the members as the recipe asks, and their summary."""
    from texture.bed import make_bed
    from texture.composition import find_scheme
    from texture.output import summary_dataset, write_members, write_netcdf
    from texture.writing_bed import write_bed

    found, recipe = result.found, result.found.recipe
    rim = result.rim

    def beds() -> Iterator[tuple[int, Bed]]:
        for number in maps.numbers:
            fractions = maps.fractions(number)
            yield number, make_bed(fractions, result.estimate.evidence, found.target, recipe.bed, recipe.rim,
                                   recipe.composition.parts, rim.weight, rim.parent,
                                   hard_ground=result.bed.hard_ground_probability, cores=result.cores)  # fmt: skip

    if recipe.ensemble.files == "one":
        write_members(aside / "members.nc", found.target, recipe, beds(), maps.numbers)
    else:
        width = len(str(max(maps.numbers)))
        for number, bed in beds():
            place = aside / "members" / f"{number:0{width}d}"
            place.mkdir(parents=True)
            about = {"realization": number, "realization_of": f"{len(maps.numbers)} members, seed {recipe.seed}"}
            write_bed(bed, found.target, recipe, place / "bed.nc", attributes=about)
    scheme = find_scheme("folk")
    words = dict(zip(scheme.numbers, scheme.words, strict=True))
    assert result.members is not None
    write_netcdf(summary_dataset(result.members, found.target, recipe, words), aside / "members_summary.nc")
