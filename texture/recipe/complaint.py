"""The first problem of a refused recipe, said the way a person would."""

from __future__ import annotations

import difflib
import typing
from collections.abc import Iterator
from typing import Any

from pydantic import BaseModel, ValidationError

from texture.recipe.whole import Recipe

__all__ = ["one_line"]


def one_line(error: ValidationError) -> str:
    """Say the first problem the way a person would; count the others."""
    problems = error.errors()
    # An unknown key is more telling than the missing key that it was meant to be.
    first = next((p for p in problems if p["type"] == "extra_forbidden"), problems[0])
    where, kind = _location(first["loc"]), first["type"]
    if kind == "extra_forbidden":
        known = sorted(_keys_beside(first["loc"]))
        close = difflib.get_close_matches(str(first["loc"][-1]), known, n=1, cutoff=0.5)
        hint = f'did you mean "{close[0]}"?' if close else f"known here: {', '.join(known)}"
        text = f'unknown key "{where}"; {hint}'
    elif kind == "missing":
        text = f'missing key "{where}"'
    elif kind == "value_error":
        message = str(first["ctx"]["error"]) if "ctx" in first else first["msg"]
        text = f"{where}: {message}" if where else message
    else:
        expected = first["msg"].removeprefix("Input should be ")
        text = f"{where} = {_short(first['input'])}: expected {expected}"
    more = len(problems) - 1
    return text + (f" (and {more} more problem{'s' if more > 1 else ''})" if more else "")


def _short(value: Any) -> str:
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "…"


def _location(loc: tuple[str | int, ...]) -> str:
    parts: list[str] = []
    for item in loc:
        if isinstance(item, int):
            parts[-1] += f"[{item}]"
        elif not _is_union_tag(item):
            parts.append(item)
    return ".".join(parts)


def _is_union_tag(item: str) -> bool:
    """Pydantic names the tried branch of a union in the location; a person does not want to see it."""
    return "[" in item or "(" in item or item in {"int", "float", "str", "constrained-int", "path"}


def _keys_beside(loc: tuple[str | int, ...]) -> Iterator[str]:
    model: Any = Recipe
    for item in loc[:-1]:
        if isinstance(item, str) and isinstance(model, type) and issubclass(model, BaseModel):
            fields = {f.alias or name: f.annotation for name, f in model.model_fields.items()}
            model = _inner_model(fields.get(item))
    if isinstance(model, type) and issubclass(model, BaseModel):
        for name, field in model.model_fields.items():
            yield field.alias or name


def _inner_model(annotation: Any) -> Any:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for argument in typing.get_args(annotation):
        found = _inner_model(argument)
        if found is not None:
            return found
    return None
