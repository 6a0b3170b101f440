"""From a TOML file (and `--set` overrides) to a checked `Recipe`, and back to `recipe_resolved.toml`."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any, Literal

from pydantic import ValidationError

from texture.errors import RecipeError
from texture.recipe.complaint import one_line
from texture.recipe.paths import with_absolute_paths
from texture.recipe.whole import Recipe

__all__ = ["read_recipe", "resolved_toml"]


def read_recipe(
    path: str | Path,
    overrides: Iterable[str] = (),
    output: str | Path | None = None,
    settings: Mapping[str, Any] | None = None,
) -> Recipe:
    """Read a recipe, apply overrides, check it and make its paths absolute.

    Parameters
    ----------
    path : path
        TOML file. Relative paths inside it are relative to its folder.
    overrides : iterable of str
        `key.path=value` pairs; the value is TOML, or a plain word taken as a string; without a value the key
        is left to its default. Items of a list of tables are reached by their number from 0
        (`samples.0.crs=EPSG:4326`).
    output : path, optional
        Output folder, relative to the current folder; replaces the recipe's.
    settings : mapping, optional
        Blocks to change, such as `{"method": {"neighbours": 24}}`, merged into the file's.

    Raises
    ------
    RecipeError
        For a missing or malformed file, an unknown key (the nearest known key is named), a value out
        of range, or an input file that does not exist.
    """
    path = Path(path)
    given = _merged(_load(path), settings or {})
    for override in overrides:
        _apply(given, override)
    if output is not None:
        given["output"] = str(Path(output).absolute())
    try:
        recipe = Recipe.model_validate(given)
    except ValidationError as error:
        raise RecipeError(f"{path.name}: {one_line(error)}") from error
    return with_absolute_paths(recipe, path.absolute().parent, path.name)


def resolved_toml(recipe: Recipe, base: Path, outside: Literal["relative", "name"] = "relative") -> str:
    """Write every setting, defaults included, as TOML text with paths relative to `base`.

    Paths outside it are relative too, or their name alone, which tells nothing of the machine.
    """
    import os

    import tomli_w

    def plain(value: Any) -> Any:
        if isinstance(value, Path):
            if outside == "name" and not value.is_relative_to(base):
                return value.name
            return Path(os.path.relpath(value, base)).as_posix() if value.is_absolute() else value.as_posix()
        if isinstance(value, Mapping):
            return {key: plain(v) for key, v in value.items() if v is not None}
        if isinstance(value, (list, tuple)):
            return [plain(v) for v in value]
        return value

    head = "# Every setting of this run, defaults included. An absent key means: not set.\n"
    return head + tomli_w.dumps(plain(recipe.model_dump(by_alias=True)))


def _load(path: Path) -> dict[str, Any]:
    try:
        with path.open("rb") as stream:
            return tomllib.load(stream)
    except FileNotFoundError:
        raise RecipeError(f"{path}: no such recipe; expected a TOML file") from None
    except IsADirectoryError:
        raise RecipeError(f"{path}: this is a folder; expected the recipe file inside it") from None
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise RecipeError(f"{path.name}: not valid TOML: {error}") from error


def _apply(settings: dict[str, Any], override: str) -> None:
    key, equals, text = override.partition("=")
    if not equals or not key.strip():
        raise RecipeError(f'--set "{override}": expected key.path=value, such as method.neighbours=24')
    try:
        value = tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        value = text
    *parents, last = key.strip().split(".")
    here: Any = settings
    for name in parents:
        here = _step(here, name, override)
    if not text.strip() and isinstance(here, dict):
        here.pop(last, None)
    elif isinstance(here, list):
        if not last.isdigit() or int(last) >= len(here):
            raise RecipeError(f'--set "{override}": "{last}" is no item of that list of {len(here)}')
        here[int(last)] = value
    else:
        here[last] = value


def _step(here: Any, name: str, override: str) -> Any:
    if isinstance(here, list):
        if not name.isdigit() or int(name) >= len(here):
            raise RecipeError(f'--set "{override}": "{name}" is no item of that list of {len(here)}')
        return here[int(name)]
    below = here.setdefault(name, {})
    if not isinstance(below, (dict, list)):
        raise RecipeError(f'--set "{override}": "{name}" is a single value and has no keys below it')
    return below


def _merged(below: dict[str, Any], above: Mapping[str, Any]) -> dict[str, Any]:
    """Put blocks of settings over those of the file, key by key."""
    merged = dict(below)
    for key, value in above.items():
        inside = merged.get(key)
        merged[key] = _merged(inside, value) if isinstance(inside, dict) and isinstance(value, Mapping) else value
    return merged
