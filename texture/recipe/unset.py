"""Settings that a recipe left to their defaults: what they are, and what they mean."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from texture.recipe.settings import Settings
from texture.recipe.whole import Recipe

__all__ = ["Unset", "left_to_default"]


@dataclass(frozen=True)
class Unset:
    """One setting that the recipe does not name.

    Attributes
    ----------
    key : str
        Such as "method.neighbours"; items of a list have no number ("samples.unit").
    value : object
        The default, which acts.
    description : str
    """

    key: str
    value: Any
    description: str


def left_to_default(recipe: Recipe) -> list[Unset]:
    """List every setting that the recipe left to its default, each key once, in the order of the blocks.

    Examples
    --------
    >>> from texture.recipe import Recipe
    >>> recipe = Recipe.model_validate({
    ...     "samples": [{"file": "a.csv"}], "target": {"file": "grid.nc"}, "method": {"neighbours": 20},
    ... })
    >>> unset = {u.key: u.value for u in left_to_default(recipe)}
    >>> unset["method.name"], "method.neighbours" in unset, unset["rim"]
    ('kriging', False, None)
    """
    found: dict[str, Unset] = {}
    for unset in _inside(recipe, ""):
        found.setdefault(unset.key, unset)
    return list(found.values())


def _inside(block: Settings, place: str) -> Iterator[Unset]:
    for name, field in type(block).model_fields.items():
        value, key = getattr(block, name), f"{place}{field.alias or name}"
        given = name in block.model_fields_set
        items = value if isinstance(value, tuple) else (value,)
        blocks = [item for item in items if isinstance(item, Settings)]
        if blocks and (given or not isinstance(value, tuple)):
            for item in blocks:
                yield from _inside(item, f"{key}.")
        elif not given:
            yield Unset(key, value, field.description or "")
