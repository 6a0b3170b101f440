"""`texture cases`: the beds of a sensitivity set."""

from __future__ import annotations

from typing import Annotated, Any

import typer

from texture_cli.options import JsonFlag, OutputFolder, Overwrite, Quiet, RecipePath, Settings
from texture_cli.running import Report, run

__all__ = ["cases"]


def cases(
    recipe: RecipePath,
    list_: Annotated[
        bool, typer.Option("--list", help="Only list the cases, their size on disk and the time; write nothing.")
    ] = False,
    only: Annotated[
        list[int] | None,
        typer.Option(
            "--only", help="Make this case alone, by its number; repeatable.", metavar="N", show_default=False
        ),
    ] = None,
    output: OutputFolder = None,
    set_: Settings = None,
    overwrite: Overwrite = False,
    quiet: Quiet = False,
    as_json: JsonFlag = False,
) -> None:
    """Build the beds of the recipe's [sensitivity] block, each labelled with its settings.

    Writes cases/NN/bed.nc (or cases.nc), cases.csv with every case's settings, and cases.png.

    Example: texture cases recipe.toml --list
    """

    def work(progress: Any) -> Report:
        from texture.pipeline import cases as run_cases
        from texture.pipeline import list_cases

        if list_:
            plan = list_cases(recipe, overrides=set_ or (), output=output)
            return Report(plan.lines(), plan.summary())
        made = run_cases(
            recipe, overrides=set_ or (), output=output, overwrite=overwrite, only=only or (), progress=progress
        )
        return Report(made.summary_lines(), made.summary())

    run(work, quiet=quiet, as_json=as_json)
