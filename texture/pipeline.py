"""The whole program on one page: spreadsheets → stations → structure → map → bed → files.

Each step is one call into its own room. Nothing downstream reaches back: validation calls the same
functions on folds.
"""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any

from texture.cases import CasePlan, plan_cases
from texture.choosing import fit_candidates
from texture.clock import Clock
from texture.core_layers import check_cores, core_layers
from texture.early import check_early
from texture.ensemble import drawn_ensemble
from texture.estimate import estimate_on
from texture.flagging import flag_stations
from texture.further import map_further
from texture.hard_ground import hard_ground_probability
from texture.inventory import make_inventory
from texture.observations import observe
from texture.placing import place_stations
from texture.progress import Progress, Silent
from texture.quantities import learn_quantities, map_quantities
from texture.recipe import Recipe, with_method
from texture.recipe.file import read_recipe
from texture.result import Intake, Result, Validated
from texture.resuming import close_journal, open_journal
from texture.second_look import second_look
from texture.sensitivity import CASE_RESULTS, CaseSet, check_cases, make_case_set
from texture.spaces import make_spaces
from texture.stations import Stations, read_samples
from texture.structure.plane import Plane
from texture.targets import Target, points_per_side, read_target
from texture.treatments import plain_treatment
from texture.validate import validate_methods
from texture.zones import locate_zones

__all__ = ["build", "cases", "intake", "list_cases", "read_stations", "validate"]

Where = str | Path


def intake(
    recipe_path: Where, *, overrides: Iterable[str] = (), output: Where | None = None, overwrite: bool = False,
    progress: Progress | None = None, **settings: Any,
) -> Intake:  # fmt: skip
    """Read the samples and account for every row; writes stations and audit."""
    from texture.output import ResultFolder
    from texture.writing import write_intake

    recipe, progress = read_recipe(recipe_path, overrides, output, settings), progress or Silent()
    folder = ResultFolder(recipe.output, overwrite)
    stations = _stations(recipe, _target(recipe, progress), progress)
    return write_intake(Intake(recipe, stations), folder)


def validate(
    recipe_path: Where, *, overrides: Iterable[str] = (), output: Where | None = None, overwrite: bool = False,
    progress: Progress | None = None, **settings: Any,
) -> Validated:  # fmt: skip
    """Say by cross-validation how wrong the map is; writes the scores and every held-out prediction."""
    from texture.output import ResultFolder
    from texture.writing import write_validation

    recipe, progress = read_recipe(recipe_path, overrides, output, settings), progress or Silent()
    folder = ResultFolder(recipe.output, overwrite)
    target = _target(recipe, progress)
    result = write_validation(_validated(recipe, target, progress, Clock(), folder.path), folder)
    close_journal(folder.path)
    return result


def build(
    recipe_path: Where, *, overrides: Iterable[str] = (), output: Where | None = None, overwrite: bool = False,
    progress: Progress | None = None, **settings: Any,
) -> Result:  # fmt: skip
    """Build a model's starting bed: the main job.

    Parameters
    ----------
    recipe_path : path
        The recipe (TOML).
    overrides : iterable of str
        `key.path=value` pairs, as on the command line.
    output : path, optional
        Output folder instead of the recipe's.
    overwrite : bool
        Replace the files of an earlier run.
    progress : Progress, optional
        Where to show progress; silent by default.
    **settings
        Blocks of the recipe to change, such as `method={"neighbours": 24}`.

    Returns
    -------
    Result
        Stations, target, structure, validation, estimate, bed, and the files that were written.

    Raises
    ------
    TextureError
        One of its leaves, with a line that says where, what was found and what to do.
    """
    from texture.bed import Water, make_bed, moved_by
    from texture.output import RESULTS, ResultFolder
    from texture.writing import write_all

    clock, progress = Clock(), progress or Silent()
    recipe = read_recipe(recipe_path, overrides, output, settings)
    folder = ResultFolder(recipe.output, overwrite, (*RESULTS, *(f.name for f in recipe.further_targets)))
    with clock.stage("read"):
        target = _target(recipe, progress)
        early = check_early(recipe, target)
    found = _validated(recipe, target, progress, clock, folder.path)
    mapper = found.mapper
    with clock.stage("estimate"):
        per_side = points_per_side(recipe.target.points_per_cell, found.cell_side_m, found.range_m)
        estimate = estimate_on(target, mapper, found.plane, found.validation.support, per_side,
                               progress, recipe.method.estimate == "median", found.heard)  # fmt: skip
        quantities = map_quantities(found.quantities, target, found.plane, per_side, progress)
    with clock.stage("second look"), progress.stage("second look"):
        look = second_look(mapper, found.some_centres(20_000), recipe.seed)
    with clock.stage("bed"):
        rim, cores = early.rim, core_layers(found)
        bed = make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim, recipe.composition.parts,
                       rim.weight, rim.parent, hard_ground=hard_ground_probability(found), cores=cores)  # fmt: skip
        water = Water(recipe.bed.water.temperature_c, recipe.bed.water.salinity)
        moved = tuple(moved_by(condition, bed, target, water) for condition in early.conditions)
        inventory = make_inventory(found, estimate, bed)
    further = map_further(found, early.further, clock, progress)
    result = Result(
        found,
        estimate,
        per_side,
        look,
        bed,
        clock,
        moved=moved,
        inventory=inventory,
        quantities=quantities,
        cores=cores,
        rim=rim,
        further=further,
    )
    with drawn_ensemble(result, folder, progress) as (result, maps), clock.stage("write"), progress.stage("write"):
        result = write_all(result, folder, Path(recipe_path), maps)
    close_journal(folder.path)
    return result


def cases(
    recipe_path: Where, *, overrides: Iterable[str] = (), output: Where | None = None, overwrite: bool = False,
    only: Iterable[int] = (), progress: Progress | None = None, **settings: Any,
) -> CaseSet:  # fmt: skip
    """Make the beds of the recipe's sensitivity set; `only` names single cases by their numbers.

    A case is the same bytes whether it is made alone or with the others.
    """
    from texture.output import ResultFolder

    clock, progress, only = Clock(), progress or Silent(), tuple(only)
    recipe = read_recipe(recipe_path, overrides, output, settings)
    if recipe.method.name not in ("best", "average"):  # nothing of a case hangs on how other methods do
        recipe = recipe.model_copy(update={"validation": recipe.validation.model_copy(update={"compare": ()})})
    folder = ResultFolder(recipe.output, overwrite, CASE_RESULTS)
    with clock.stage("read"):
        target = _target(recipe, progress)
        check_cases(recipe, target, only)
    found = _validated(recipe, target, progress, clock, folder.path)
    per_side = points_per_side(recipe.target.points_per_cell, found.cell_side_m, found.range_m)
    with clock.stage("estimate"):
        estimate = estimate_on(found.target, found.mapper, found.plane, found.validation.support, per_side,
                               progress, median=recipe.method.estimate == "median")  # fmt: skip
    plan = plan_cases(recipe, found.target)
    made = make_case_set(found, plan, only, per_side, estimate.evidence, folder, progress, clock)
    close_journal(folder.path)
    return made


def list_cases(
    recipe_path: Where, *, overrides: Iterable[str] = (), output: Where | None = None, **settings: Any
) -> CasePlan:
    """List the cases of the recipe's sensitivity set, their size and time, without reading the samples."""
    recipe = read_recipe(recipe_path, overrides, output, settings)
    return plan_cases(recipe, read_target(recipe.target))


def read_stations(recipe_path: Where, **settings: Any) -> Stations:
    """Read the samples of a recipe as stations with their audit, writing nothing."""
    recipe = read_recipe(recipe_path, settings=settings)
    return _stations(recipe, _target(recipe, Silent()), Silent())


def _target(recipe: Recipe, progress: Progress) -> Target:
    with progress.stage("read the grid"):
        return read_target(recipe.target)


def _stations(recipe: Recipe, target: Target, progress: Progress) -> Stations:
    with progress.stage("read the samples"):
        return place_stations(read_samples(recipe), target, recipe.intake)


def _validated(recipe: Recipe, target: Target, progress: Progress, clock: Clock, output: Path) -> Validated:
    with clock.stage("read"):
        stations = _stations(recipe, target, progress)
        check_cores(recipe, stations)
    plane = Plane.choose(stations.table["longitude"].to_numpy(), stations.table["latitude"].to_numpy(), target.crs)
    zones = locate_zones(recipe, target, stations)
    observations = observe(stations, plain_treatment(recipe.composition).logratio, plane)
    with clock.stage("space"), progress.stage("find what distance means"):
        spaces = make_spaces(recipe, target, plane, observations)
    with clock.stage("fit"), progress.stage("fit the spatial structure"):
        plain, treated = fit_candidates(observations, recipe, spaces[recipe.method.tried_with])
    with clock.stage("validate"):
        journal = open_journal(output, recipe, observations, target)
        validation = validate_methods(
            observations, target, plane, plain, treated, recipe, progress, journal, spaces, zones
        )
        recipe = with_method(recipe, validation.method)
        quantities = learn_quantities(stations, observations, validation.folds, recipe, progress, spaces, zones)
    mapper = validation.mapper(recipe, zones)
    stations = flag_stations(stations, mapper, observations)
    return Validated(recipe, stations, target, plane, observations, mapper, validation, quantities, spaces)
