"""Arguments and flags that commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

__all__ = ["JsonFlag", "OutputFolder", "Overwrite", "Quiet", "RecipePath", "Settings"]

RecipePath = Annotated[Path, typer.Argument(help="Recipe file (TOML).", show_default=False, metavar="RECIPE")]
OutputFolder = Annotated[
    Path | None, typer.Option("--output", "-o", help="Output folder instead of the recipe's.", metavar="DIR")
]
Settings = Annotated[
    list[str] | None,
    typer.Option(
        "--set",
        help="Override one setting; repeatable. Example: --set method.neighbours=24; without a value, the default.",
        metavar="KEY=VALUE",
    ),
]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="Say nothing but errors.")]
JsonFlag = Annotated[bool, typer.Option("--json", help="Print one JSON object on standard output.")]
Overwrite = Annotated[bool, typer.Option("--overwrite", help="Replace the files of an earlier run.")]
