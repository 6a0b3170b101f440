"""`texture recipe`: what a recipe may hold, for editors and for people."""

from __future__ import annotations

from typing import Annotated

import typer

__all__ = ["recipe"]


def recipe(
    schema: Annotated[bool, typer.Option("--schema", help="JSON Schema, for editors that complete and check.")] = False,
    reference: Annotated[
        bool, typer.Option("--reference", help="Every setting in Markdown, with values and default.")
    ] = False,
) -> None:
    """Print what a recipe may hold: a JSON Schema, or a reference of all settings.

    Example: texture recipe --schema > recipe.schema.json
    """
    if schema == reference:
        typer.echo("texture: recipe needs one of --schema and --reference", err=True)
        raise typer.Exit(2)
    import json

    from texture.recipe.reference import recipe_schema, settings_reference

    typer.echo(json.dumps(recipe_schema(), indent=2, ensure_ascii=False) if schema else settings_reference(), nl=schema)
