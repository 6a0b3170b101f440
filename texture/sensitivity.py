"""A sensitivity set: every case's bed, its table and a picture of the design."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.cases import Case, CasePlan, plan_cases
from texture.clock import Clock
from texture.core_layers import core_layers
from texture.early import RimInputs, check_early, read_rim
from texture.errors import RecipeError
from texture.hard_ground import hard_ground_probability
from texture.progress import Progress
from texture.result import Validated, written_line

if TYPE_CHECKING:
    from texture.bed import Bed, CoreLayer
    from texture.output import ResultFolder
    from texture.recipe import Recipe
    from texture.targets import Target

__all__ = ["CASE_RESULTS", "CaseSet", "check_cases", "choose_cases", "make_case_set"]

CASE_RESULTS = ("cases", "cases.csv", "cases.png", "cases.nc")
"""What a run of cases writes into the output folder."""


@dataclass(frozen=True, eq=False)
class CaseSet:
    """A finished sensitivity set.

    Attributes
    ----------
    found : Validated
    plan : CasePlan
    made : tuple of int
        Numbers of the cases that were made.
    clock : Clock
    files : tuple of Path
    """

    found: Validated
    plan: CasePlan
    made: tuple[int, ...]
    clock: Clock
    files: tuple[Path, ...] = field(default=())

    def summary(self) -> dict[str, Any]:
        """Counts, seconds and files."""
        root = self.found.recipe.output
        return {
            "cases": len(self.plan.cases),
            "made": list(self.made),
            "left_out": self.plan.left_out,
            "seconds": {name: round(value, 3) for name, value in self.clock.seconds.items()},
            "files": [p.relative_to(root).as_posix() for p in self.files],
        }

    def summary_lines(self) -> list[str]:
        """Lines for a person."""
        lines = [self.found.recipe.title, *self.plan.lines()[:1]]
        if len(self.made) < len(self.plan.cases):
            lines.append(f"  made        {', '.join(map(str, self.made))} alone")
        return [*lines, *written_line(self.found.recipe, self.files)]

    def __repr__(self) -> str:
        return "\n".join(self.summary_lines())


def choose_cases(plan: CasePlan, only: Sequence[int]) -> tuple[Case, ...]:
    """Cases of these numbers, all where none is named; raises `RecipeError` for a number beyond the count."""
    for number in only:
        if not 1 <= number <= len(plan.cases):
            raise RecipeError(f"case {number}: there are {len(plan.cases)} cases, from 1; see them with --list")
    return tuple(c for c in plan.cases if not only or c.number in only)


def check_cases(recipe: Recipe, target: Target, only: Sequence[int]) -> None:
    """Find mistakes in a sensitivity set before the work."""
    check_early(recipe, target)
    choose_cases(plan_cases(recipe, target), only)


def make_case_set(
    found: Validated, plan: CasePlan, only: Sequence[int], per_side: int, evidence: NDArray[np.int8], folder: ResultFolder,
    progress: Progress, clock: Clock,
) -> CaseSet:  # fmt: skip
    """Make and write the cases; each case's bed is the same bytes whichever others are made with it.

    Parameters
    ----------
    found : Validated
    plan : CasePlan
    only : sequence of int
        Numbers of the cases to make; none: all, and their table and picture.
    per_side : int
    evidence : int array, shape (n,)
        Of the estimate.
    folder : ResultFolder
    progress : Progress
    clock : Clock
    """
    from texture.case_maps import case_maps

    recipe, cases = found.recipe, choose_cases(plan, only)
    assert recipe.sensitivity is not None  # the plan comes from it
    tonnes: dict[int, dict[str, float]] = {}
    hard, cores = hard_ground_probability(found), core_layers(found)
    rims: dict[str, RimInputs] = {}
    with clock.stage("cases"), folder.scratch() as scratch, folder.filling() as aside:

        def beds() -> Iterator[tuple[Case, Recipe, Bed]]:
            with progress.stage("cases", total=len(cases)) as advance:
                wanted = list(dict.fromkeys(c.map_settings for c in cases))
                for settings, fractions in case_maps(found, per_side, wanted, scratch, progress):
                    for case in (c for c in cases if c.map_settings == settings):
                        changed = recipe.model_copy(update={"bed": case.made_by.bed, "rim": case.made_by.rim})
                        key = repr(changed.rim)
                        rims[key] = rims[key] if key in rims else read_rim(changed, found.target)
                        bed = _bed(case, changed, found, fractions, evidence, hard, cores, rims[key])
                        tonnes[case.number] = bed.account.tonnes
                        yield case, changed, bed
                        advance(1)

        if recipe.sensitivity.files == "one":
            _write_one(beds(), found, [c.number for c in cases], aside)
        else:
            _write_each(beds(), found, len(plan.cases), aside)
        if not only:
            _write_table(plan, tonnes, recipe, aside)
    result = CaseSet(found, plan, tuple(c.number for c in cases), clock)
    return replace(result, files=folder.files)


def _bed(
    case: Case,
    changed: Recipe,
    found: Validated,
    fractions: Any,
    evidence: NDArray[np.int8],
    hard: NDArray[np.float64] | None,
    cores: Mapping[int, CoreLayer],
    rim: RimInputs,
) -> Bed:
    from texture.bed import make_bed

    return make_bed(
        fractions, evidence, found.target, changed.bed, changed.rim, changed.composition.parts, rim.weight, rim.parent,
        case.made_by.porosity, hard, cores,
    )  # fmt: skip


def case_folder(number: int, count: int) -> str:
    """Name of a case's folder: as many digits as the last one has, two at least."""
    return f"{number:0{max(2, len(str(count)))}d}"


def _write_each(beds: Iterator[tuple[Case, Recipe, Bed]], found: Validated, count: int, aside: Path) -> None:
    from texture.writing_bed import write_bed

    for case, changed, bed in beds:
        place = aside / "cases" / case_folder(case.number, count)
        place.mkdir(parents=True)
        write_bed(bed, found.target, changed, place / "bed.nc", attributes=case.attributes)


def _write_one(beds: Iterator[tuple[Case, Recipe, Bed]], found: Validated, numbers: list[int], aside: Path) -> None:
    from texture.output import write_stack

    write_stack(aside / "cases.nc", found.target, ((c.number, changed, bed) for c, changed, bed in beds), numbers)


def _write_table(plan: CasePlan, tonnes: dict[int, dict[str, float]], recipe: Recipe, aside: Path) -> None:
    import pandas as pd

    from texture.output import write_csv
    from texture.report import design_picture

    assert recipe.sensitivity is not None
    one = recipe.sensitivity.files == "one"
    rows = []
    for case in plan.cases:
        place = f"cases/{case_folder(case.number, len(plan.cases))}/bed.nc"
        row: dict[str, Any] = {"case": case.number, "file": "cases.nc" if one else place, "settings": case.name}
        for vary in recipe.sensitivity.vary:
            row[vary.label + ("_factor" if vary.factors is not None else "")] = case.settings.get(vary)
        row |= {f"{name}_tonnes": round(value, 1) for name, value in tonnes[case.number].items()}
        rows.append(row)
    table = pd.DataFrame(rows)
    write_csv(aside / "cases.csv", table.astype({"member": "Int64"} if "member" in table else {}))
    (aside / "cases.png").write_bytes(design_picture(plan.cases, recipe.sensitivity).content)
