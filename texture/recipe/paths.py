"""Relative paths of a recipe are relative to its folder; every file it names must exist."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from texture.errors import RecipeError
from texture.recipe.settings import Settings
from texture.recipe.whole import Recipe

__all__ = ["named_files", "with_absolute_paths"]


def with_absolute_paths(recipe: Recipe, base: Path, recipe_name: str) -> Recipe:
    """Return the recipe with absolute paths; every path in it but `output` is a file to read.

    Raises
    ------
    RecipeError
        If one of these files does not exist.
    """

    def existing(path: Path, key: str) -> Path:
        there = (base / path).resolve()
        if not there.is_file():
            found = "is a folder" if there.is_dir() else "does not exist"
            raise RecipeError(f'{recipe_name}: {key} = "{path}" {found}; expected a file beside the recipe')
        return there

    def fixed(value: Any, key: str) -> Any:
        if isinstance(value, Path):
            return existing(value, key)
        if isinstance(value, Settings):
            changes = {
                name: new
                for name, field in type(value).model_fields.items()
                if (new := fixed(old := getattr(value, name), f"{key}.{field.alias or name}")) is not old
            }
            return value.model_copy(update=changes) if changes else value
        if isinstance(value, tuple):
            new = tuple(fixed(item, f"{key}[{i}]") for i, item in enumerate(value))
            return new if any(a is not b for a, b in zip(new, value, strict=True)) else value
        return value

    changes: dict[str, Any] = {"output": (base / recipe.output).resolve()}
    for name in type(recipe).model_fields:
        if name == "output":
            continue
        new = fixed(old := getattr(recipe, name), name)
        if new is not old:  # what nobody set must not look as if somebody had
            changes[name] = new
    return recipe.model_copy(update=changes)


def named_files(recipe: Recipe) -> list[Path]:
    """List every file that a recipe names, each once, in the order of the recipe's blocks."""

    def inside(value: Any) -> Iterator[Path]:
        if isinstance(value, Path):
            yield value
        elif isinstance(value, Settings):
            for name in type(value).model_fields:
                yield from inside(getattr(value, name))
        elif isinstance(value, tuple):
            for item in value:
                yield from inside(item)

    names = (name for name in type(recipe).model_fields if name != "output")
    return list(dict.fromkeys(path for name in names for path in inside(getattr(recipe, name))))
