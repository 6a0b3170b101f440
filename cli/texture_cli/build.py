"""`texture build`: the main job."""

from __future__ import annotations

from typing import Annotated, Any

import typer

from texture_cli.options import WORK, JsonFlag, OutputFolder, Overwrite, Quiet, RecipePath, Settings
from texture_cli.running import Report, run

__all__ = ["build"]


def build(
    recipe: RecipePath,
    output: OutputFolder = None,
    set_: Settings = None,
    overwrite: Overwrite = False,
    plan: Annotated[
        bool,
        typer.Option(
            "--plan", help="Say stations, cells, memory and time, write nothing, and stop.", rich_help_panel=WORK
        ),
    ] = False,
    quiet: Quiet = False,
    as_json: JsonFlag = False,
) -> None:
    """Build the bed: read, fit, validate, estimate on the grid, add classes and rim, write.

    Writes texture.nc, bed.nc, GeoTIFFs, tables, the page report.html and provenance.json.

    Example: texture build recipe.toml --output bed_1 --set method.neighbours=24
    """

    def work(progress: Any) -> Report:
        from texture.pipeline import build as run_build
        from texture.planning import plan as make_plan

        if plan:
            planned = make_plan(recipe, overrides=set_ or (), output=output, progress=progress)
            return Report(planned.summary_lines(), planned.summary())
        result = run_build(recipe, overrides=set_ or (), output=output, overwrite=overwrite, progress=progress)
        return Report(result.summary_lines(), result.summary())

    run(work, quiet=quiet, as_json=as_json)
