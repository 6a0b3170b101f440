"""`texture intake`: read the samples and account for every row."""

from __future__ import annotations

from typing import Any

from texture_cli.options import JsonFlag, OutputFolder, Overwrite, Quiet, RecipePath, Settings
from texture_cli.running import Report, run

__all__ = ["intake"]


def intake(
    recipe: RecipePath,
    output: OutputFolder = None,
    set_: Settings = None,
    overwrite: Overwrite = False,
    quiet: Quiet = False,
    as_json: JsonFlag = False,
) -> None:
    """Read the spreadsheets, check them, and account for every row.

    Writes stations.csv, stations.gpkg, audit.csv and rows.csv; deeper.csv for what cores hold below the surface.

    Example: texture intake recipe.toml --output check
    """

    def work(progress: Any) -> Report:
        from texture.pipeline import intake as run_intake

        result = run_intake(recipe, overrides=set_ or (), output=output, overwrite=overwrite, progress=progress)
        return Report(result.summary_lines(), result.summary())

    run(work, quiet=quiet, as_json=as_json)
