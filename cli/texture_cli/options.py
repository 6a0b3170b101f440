"""Arguments and flags that commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

__all__ = ["WORK", "JsonFlag", "OutputFolder", "Overwrite", "Quiet", "RecipePath", "Settings"]

WORK, TALK = "What to do", "What to say"  # the two groups of options in every help


def _complete_setting(incomplete: str) -> list[str]:
    """Keys of a recipe that begin so, for shells that complete."""
    from texture.recipe.reference import setting_keys

    return [f"{key}=" for key in setting_keys() if key.startswith(incomplete)]


RecipePath = Annotated[Path, typer.Argument(help="Recipe file (TOML).", show_default=False, metavar="RECIPE")]
OutputFolder = Annotated[
    Path | None,
    typer.Option("--output", "-o", help="Output folder instead of the recipe's.", metavar="DIR", rich_help_panel=WORK),
]
Settings = Annotated[
    list[str] | None,
    typer.Option(
        "--set",
        help="Override one setting; repeatable. Example: --set method.neighbours=24; without a value, the default.",
        metavar="KEY=VALUE",
        autocompletion=_complete_setting,
        rich_help_panel=WORK,
    ),
]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="Say nothing but errors.", rich_help_panel=TALK)]
JsonFlag = Annotated[
    bool, typer.Option("--json", help="Print one JSON object on standard output.", rich_help_panel=TALK)
]
Overwrite = Annotated[
    bool, typer.Option("--overwrite", help="Replace the files of an earlier run.", rich_help_panel=WORK)
]
