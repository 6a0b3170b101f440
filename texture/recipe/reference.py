"""The recipe's own description, from the same fields that check it: a JSON Schema, and a settings reference."""

from __future__ import annotations

import types
import typing
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from pydantic.fields import FieldInfo

from texture.recipe.samples import COLUMN_ROLES
from texture.recipe.settings import Settings
from texture.recipe.whole import Recipe

__all__ = ["recipe_schema", "setting_keys", "settings_reference"]

HEAD = """# Settings of a recipe

<!-- Written by `texture recipe --reference`; a test holds it against the code. Do not edit. -->

A recipe is a TOML file. Paths in it are relative to its folder. Leave a setting out and its default acts; the page lists
every default that acted and what it did. `texture recipe --schema > recipe.schema.json` writes the same for editors that
understand JSON Schema: put `#:schema ./recipe.schema.json` into the first line of a recipe.
"""


def recipe_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of a recipe, with the description of every setting.

    It knows each setting by itself; what settings must agree on is checked when a recipe is read.
    """
    schema = Recipe.model_json_schema(by_alias=True)
    schema["$schema"] = "https://json-schema.org/draft/2020-12/schema"
    schema["title"] = "Recipe of Seabed Texture"
    roles = {role: {"type": "string", "description": f"heading of the {role} column"} for role in COLUMN_ROLES}
    schema["$defs"]["Samples"]["properties"]["columns"] |= {"properties": roles, "additionalProperties": False}
    return schema


def setting_keys() -> list[str]:
    """Every key that a recipe may set, dotted as `--set` wants them; items of a list are numbered 0."""
    return [f"{place}{name}" for place, block in _blocks(Recipe, "", numbered=True) for name, _ in _plain(block)]


def settings_reference() -> str:
    """Return the reference as Markdown: one table a block, in the order of the recipe."""
    sections = [HEAD]
    for place, block in _blocks(Recipe, ""):
        key = place.rstrip(".")
        title = "Top of the file" if not key else f"`{key}`"
        rows = [_row(name, field) for name, field in _plain(block)]
        if not rows:
            continue
        about = " ".join((block.__doc__ or "").split())
        sections.append(
            f"## {title}\n\n{about}\n\n| setting | values | default | |\n|---|---|---|---|\n" + "\n".join(rows) + "\n"
        )
    sections.append("Roles of `columns` in `[[samples]]`: " + ", ".join(COLUMN_ROLES) + ".\n")
    return "\n".join(sections)


def _blocks(block: type[Settings], place: str, numbered: bool = False) -> Iterator[tuple[str, type[Settings]]]:
    """A block with those inside it, each with where it stands."""
    yield place, block
    for name, field in block.model_fields.items():
        inner = _inner(field.annotation)
        if inner is not None:
            key = field.alias or name
            shown = f"{place}{key}" if numbered else _bracket(place, key, _is_tuple(field.annotation))
            number = ".0" if numbered and _is_tuple(field.annotation) else ""
            yield from _blocks(inner, f"{shown}{number}.", numbered)


def _bracket(place: str, key: str, several: bool) -> str:
    inside = f"{place}{key}".strip("[]").replace("[", "").replace("]", "")
    return f"[[{inside}]]" if several else f"[{inside}]"


def _plain(block: type[Settings]) -> Iterator[tuple[str, FieldInfo]]:
    """Fields that are values rather than blocks."""
    for name, field in block.model_fields.items():
        if _inner(field.annotation) is None:
            yield field.alias or name, field


def _row(name: str, field: FieldInfo) -> str:
    default = "required" if field.is_required() else _value(field.get_default(call_default_factory=True))
    cells = (f"`{name}`", _values(field.annotation, field.metadata), default, field.description or "")
    return "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |"


def _value(value: Any) -> str:
    if value is None:
        return "not set"
    if isinstance(value, bool):
        return f"`{str(value).lower()}`"
    if isinstance(value, str | Path):
        return f'`"{value}"`'
    if isinstance(value, tuple | dict) and not value:
        return "none"
    if isinstance(value, tuple):
        return "`[" + ", ".join(_value(item).strip("`") for item in value) + "]`"
    return f"`{value}`"


NAMES = {
    "str": "text",
    "int": "whole number",
    "float": "number",
    "bool": "`true` or `false`",
    "Path": "path",
    "date": "date",
}
BOUNDS = {"gt": ">", "ge": "≥", "lt": "<", "le": "≤"}


def _values(annotation: Any, metadata: typing.Sequence[Any] = ()) -> str:
    """Say in words what a setting takes."""
    origin, arguments = typing.get_origin(annotation), typing.get_args(annotation)
    if origin is typing.Annotated:
        return _values(arguments[0], [m for field in arguments[1:] for m in getattr(field, "metadata", [field])])
    if origin is typing.Literal:
        return ", ".join(f'`"{a}"`' for a in arguments)
    if origin in (typing.Union, types.UnionType):
        return " or ".join(_values(a, metadata) for a in arguments if a is not type(None))
    if origin is tuple:
        count = "" if Ellipsis in arguments else f"{len(arguments)} × "
        return f"list of {count}{_values(arguments[0])}"
    if origin is dict:
        return f"table of {_values(arguments[1])}"
    if annotation is Any:
        return "nested pairs"
    bounds = [f"{sign} {getattr(m, key):.4g}" for m in metadata for key, sign in BOUNDS.items() if hasattr(m, key)]
    return " ".join([NAMES[annotation.__name__], *([", ".join(bounds)] if bounds and annotation is not str else [])])


def _inner(annotation: Any) -> type[Settings] | None:
    """The block that an annotation holds, alone, optional, or as a list of them."""
    if isinstance(annotation, type) and issubclass(annotation, Settings):
        return annotation
    return next((found for a in typing.get_args(annotation) if (found := _inner(a)) is not None), None)


def _is_tuple(annotation: Any) -> bool:
    origin = typing.get_origin(annotation)
    return origin is tuple or any(_is_tuple(a) for a in typing.get_args(annotation) if a is not Ellipsis)
