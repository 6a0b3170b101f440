"""`texture draft`: a starting recipe from spreadsheets and a grid."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from texture_cli.options import JsonFlag, Overwrite, Quiet
from texture_cli.running import Report, run

__all__ = ["draft"]


def draft(
    files: Annotated[
        list[Path], typer.Argument(help="Spreadsheets and tables of samples.", show_default=False, metavar="FILES…")
    ],
    output: Annotated[Path, typer.Option("--output", "-o", help="Recipe to write.", metavar="RECIPE")] = Path(
        "recipe.toml"
    ),
    grid: Annotated[
        Path | None, typer.Option("--grid", help="Grid of the model (CF NetCDF).", metavar="GRID", show_default=False)
    ] = None,
    overwrite: Overwrite = False,
    quiet: Quiet = False,
    as_json: JsonFlag = False,
) -> None:
    """Look at spreadsheets and a grid, and write a recipe to start from.

    It names every column with what it was taken for and an example; doubts are comments that begin with DOUBT.

    Example: texture draft survey.xlsx old.csv --grid model_grid.nc -o recipe.toml
    """

    def work(progress: Any) -> Report:
        from texture.drafting import draft as write_draft

        text = write_draft(files, output, grid, overwrite)
        doubts = [line.removeprefix("# ") for line in text.splitlines() if line.startswith("# DOUBT")]
        lines = [*doubts, f"wrote {output}; read it through, then: texture build {output}"]
        return Report(lines, {"files": [output.name], "doubts": doubts})

    run(work, quiet=quiet, as_json=as_json)
