"""`texture validate`: how wrong the map is, by cross-validation."""

from __future__ import annotations

from typing import Any

from texture_cli.options import JsonFlag, OutputFolder, Overwrite, Quiet, RecipePath, Settings
from texture_cli.running import Report, run

__all__ = ["validate"]


def validate(
    recipe: RecipePath,
    output: OutputFolder = None,
    set_: Settings = None,
    overwrite: Overwrite = False,
    quiet: Quiet = False,
    as_json: JsonFlag = False,
) -> None:
    """Hold stations out, predict them, and score the methods against each other.

    Writes validation.csv and held_out.csv, and figures where the recipe asks for them.

    Example: texture validate recipe.toml --set validation.folds=random
    """

    def work(progress: Any) -> Report:
        from texture.pipeline import validate as run_validate

        result = run_validate(recipe, overrides=set_ or (), output=output, overwrite=overwrite, progress=progress)
        return Report(result.summary_lines(), result.summary())

    run(work, quiet=quiet, as_json=as_json)
