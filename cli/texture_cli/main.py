"""The command `texture`: one module for each of its commands, no science here."""

from __future__ import annotations

import typer

from texture_cli.build import build
from texture_cli.cases import cases
from texture_cli.draft import draft
from texture_cli.inspect import inspect
from texture_cli.intake import intake
from texture_cli.recipe import recipe
from texture_cli.validate import validate

__all__ = ["app", "main"]

app = typer.Typer(
    name="texture",
    help="From messy seabed grab-sample spreadsheets to a numerical model's starting bed.",
    epilog="Start with: texture draft *.xlsx --grid model_grid.nc -o recipe.toml, then: texture build recipe.toml",
    no_args_is_help=True,
    add_completion=True,
    pretty_exceptions_enable=False,
    rich_markup_mode="rich",
    context_settings={"help_option_names": ["-h", "--help"]},
)
START, WORK, LOOK = "To start", "The work", "To look at"
app.command(rich_help_panel=START)(draft)
app.command(rich_help_panel=START)(recipe)
app.command(rich_help_panel=WORK)(intake)
app.command(rich_help_panel=WORK)(validate)
app.command(rich_help_panel=WORK)(build)
app.command(rich_help_panel=WORK)(cases)
app.command(rich_help_panel=LOOK)(inspect)


def _version(asked: bool) -> None:
    if asked:
        from texture import __version__

        typer.echo(f"texture {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: bool = typer.Option(False, "--version", callback=_version, is_eager=True, help="Show the version."),
) -> None:
    pass


def main() -> None:
    """Entry point of the console script."""
    app()


if __name__ == "__main__":
    main()
