"""What a build would take: stations, cells, memory and time, from a look at the inputs alone."""

from __future__ import annotations

import os
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from texture.cases import CasePlan, plan_cases
from texture.clock import Clock
from texture.core_layers import check_cores
from texture.cost import about, fit_seconds, validate_seconds
from texture.early import check_early
from texture.observations import observe
from texture.placing import place_stations
from texture.progress import Progress, Silent
from texture.recipe.file import read_recipe
from texture.result import rows_lines
from texture.stations import Stations, read_samples
from texture.structure.plane import Plane
from texture.targets import Target, points_per_side, read_target
from texture.treatments import candidates, plain_treatment

if TYPE_CHECKING:
    from texture.recipe import Recipe

__all__ = ["Plan", "plan"]

# Measured on two cores of one machine: the demo (estimate 0.56 s of 8,852 cells), and a raster of
# 1.06 million cells in two layers of four classes, whose peak was 1.57 GB where this says 1.60. The plan says how far it may be off.
CELLS_PER_S = 15_000.0  # points estimated with means, quantiles and odds
MEMBER_POINTS_PER_S = 150_000.0  # points of members drawn, put back to fractions and summed up
WRITE_S = 8.0  # page, figures and files of a small grid
WRITE_CELLS_PER_S = 40_000.0
BASE_MB = 450.0  # the program with its libraries
CELL_BYTES = 420.0  # grid and map of a cell
LAYER_BYTES = 90.0  # of each layer in a cell
CLASS_BYTES = 60.0  # of each class in each layer in a cell


@dataclass(frozen=True, eq=False)
class Plan:
    """What a build would take.

    Attributes
    ----------
    recipe : Recipe
    stations : Stations
    target : Target
    treatments : int
        Treatments of zeros that held-out error would choose from.
    per_side : int
        Points along each side of a cell, as if the range were twenty cells or more where the recipe says "auto".
    seconds : dict of str to float
        Of each stage; those of reading were measured just now.
    folds : int
        Folds; with `folds = "each"` as many as stations that inform the map.
    cases : CasePlan or None
        What `texture cases` would make with the recipe's sensitivity set.
    further : tuple of Target
        The recipe's further targets.
    """

    recipe: Recipe
    stations: Stations
    target: Target
    treatments: int
    per_side: int
    folds: int
    seconds: dict[str, float] = field(default_factory=dict)
    cases: CasePlan | None = None
    further: tuple[Target, ...] = ()

    @property
    def cells(self) -> int:
        """Water cells."""
        return int(self.target.active.sum())

    @property
    def memory_mb(self) -> float:
        """Largest memory of the build."""
        bed = self.recipe.bed
        cell = CELL_BYTES + len(bed.layers) * (LAYER_BYTES + CLASS_BYTES * len(bed.classes))
        return BASE_MB + sum(t.n_cells for t in (self.target, *self.further)) * cell / 1e6

    @property
    def _named(self) -> list[tuple[str, Target]]:
        return [(s.name, t) for s, t in zip(self.recipe.further_targets, self.further, strict=True)]

    def summary(self) -> dict[str, Any]:
        """Numbers for a program."""
        return {
            **self.stations.counts,
            "cells": self.cells,
            "points_per_cell": self.per_side**2,
            "treatments": self.treatments,
            "folds": self.folds,
            "memory_mb": round(self.memory_mb),
            "members": self.recipe.ensemble.members,
            "further_targets": {name: int(t.active.sum()) for name, t in self._named},
            "cases": None if self.cases is None else self.cases.summary(),
            "seconds": {name: round(value, 1) for name, value in self.seconds.items()},
        }

    def summary_lines(self) -> list[str]:
        """Lines for a person."""
        stages = ", ".join(f"{name} {about(value)}" for name, value in self.seconds.items())
        memory, there = self.memory_mb / 1000.0, _machine_gb()
        fits = f" of {there:.0f} GB here" if there else ""
        lines = [
            f"{self.recipe.title}: a plan, nothing was written",
            *rows_lines(self.stations),
            f"  grid        {self.target.name}: {self.target.size_text}, {self.cells:,} of them water; {self.per_side**2} point"
            f"{'s' * (self.per_side > 1)} in each{' or more, by the fitted range' * (self.recipe.target.points_per_cell == 'auto')}",
            f"  work        {self.treatments} treatment{'s' * (self.treatments != 1)} of zeros and {_controls(self.recipe)} other methods in "
            f"{self.folds:,} folds, then the map",
            f"  memory      about {memory:.1f} GB{fits}",
            f"  time        about {about(sum(self.seconds.values()))}: {stages}; may be off by a factor of three",
        ]
        for i, (name, grid) in enumerate(self._named):
            lines.insert(
                3 + i,
                f"  {'' if i else 'further':<11} {name}: {grid.size_text}, {int(grid.active.sum()):,} of them water; the same fit",
            )
        if self.recipe.validation.folds == "each":
            lines.append(
                f'  look        folds = "each" fits everything anew for each of {self.folds:,} stations; "matched" needs '
                f"{self.recipe.validation.count} fits"
            )
        if self.cases is not None:
            lines += [self.cases.lines()[0], "              by texture cases; its --list names them"]
        if there and memory > 0.8 * there:
            lines.append(
                "  look        this may not fit into memory: choose larger cells, fewer layers or smaller bounds"
            )
        return lines

    def __repr__(self) -> str:
        return "\n".join(self.summary_lines())


def plan(
    recipe_path: str | Path,
    *,
    overrides: Iterable[str] = (),
    output: str | Path | None = None,
    progress: Progress | None = None,
    **settings: Any,
) -> Plan:
    """Read and check grid and samples, and say what a build with them would take; writes nothing.

    Parameters
    ----------
    recipe_path, overrides, output, progress, **settings
        As for `texture.build`.

    Raises
    ------
    TextureError
        One of its leaves, as the build itself would.
    """
    recipe, progress, clock = read_recipe(recipe_path, overrides, output, settings), progress or Silent(), Clock()
    with clock.stage("read"):
        with progress.stage("read the grid"):
            target = read_target(recipe.target)
            further = tuple(early.target for early in check_early(recipe, target).further)
        with progress.stage("read the samples"):
            stations = place_stations(read_samples(recipe), target, recipe.intake)
            check_cores(recipe, stations)
    plane = Plane.choose(stations.table["longitude"].to_numpy(), stations.table["latitude"].to_numpy(), target.crs)
    observations = observe(stations, plain_treatment(recipe.composition).logratio, plane)
    count = len(candidates(recipe.composition, observations, has_variance=True))
    per_side = points_per_side(recipe.target.points_per_cell, 0.0, 1.0)
    folds = observations.count if recipe.validation.folds == "each" else recipe.validation.count
    fitting = {
        "fit": fit_seconds(observations.count, count),
        "validate": validate_seconds(observations.count, count, folds),
    }
    seconds = {**clock.seconds, **_seconds(recipe, fitting, (target, *further), per_side)}
    cases = None if recipe.sensitivity is None else plan_cases(recipe, target)
    return Plan(recipe, stations, target, count, per_side, folds, seconds, cases, further)


def _seconds(recipe: Recipe, fitting: dict[str, float], targets: tuple[Target, ...], per_side: int) -> dict[str, float]:
    target, cells = targets[0], float(sum(t.active.sum() for t in targets))
    write = WRITE_S + sum(t.n_cells for t in targets) / WRITE_CELLS_PER_S
    if not recipe.method.name.startswith("kriging"):
        return {"estimate": cells * per_side**2 / CELLS_PER_S, "write": write}
    members, points = recipe.ensemble.members, cells * per_side**2
    return {
        **fitting,
        "estimate": points / CELLS_PER_S,
        **({"members": members * int(target.active.sum()) * per_side**2 / MEMBER_POINTS_PER_S} if members else {}),
        "write": write + members * target.n_cells / WRITE_CELLS_PER_S / 4.0,
    }


def _controls(recipe: Recipe) -> int:
    return len([name for name in dict.fromkeys(recipe.validation.compare) if name != recipe.method.name])


def _machine_gb() -> float:
    """Memory of this machine, 0 where the system does not tell."""
    try:
        return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES") / 1e9
    except (ValueError, OSError, AttributeError):
        return 0.0
