"""From a TOML file (and `--set` overrides) to a checked `Recipe`, and back to `recipe_resolved.toml`."""

from __future__ import annotations

import difflib
import tomllib
import typing
from collections.abc import Callable, Iterable, Iterator, Mapping
from pathlib import Path
from typing import Any

from pydantic import BaseModel, ValidationError

from texture.errors import RecipeError
from texture.recipe import Mobility, Recipe, Samples

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
        raise RecipeError(f"{path.name}: {_one_line(error)}") from error
    return _absolute(recipe, path.absolute().parent, path.name)


def resolved_toml(recipe: Recipe, base: Path) -> str:
    """Write every setting, defaults included, as TOML text with paths relative to `base`."""
    import os

    import tomli_w

    def plain(value: Any) -> Any:
        if isinstance(value, Path):
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


def _one_line(error: ValidationError) -> str:
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


def _absolute(recipe: Recipe, base: Path, recipe_name: str) -> Recipe:
    """Return the recipe with absolute paths; input files must exist."""

    def fix(value: Path | None, key: str, must_exist: bool = True) -> Path | None:
        if value is None:
            return None
        path = (base / value).resolve()
        if must_exist and not path.is_file():
            found = "is a folder" if path.is_dir() else "does not exist"
            raise RecipeError(f'{recipe_name}: {key} = "{value}" {found}; expected a file beside the recipe')
        return path

    def with_files(i: int, block: Samples) -> Samples:
        join = block.join
        if join is not None and join.file is not None:
            join = join.model_copy(update={"file": fix(join.file, f"samples[{i}].join.file")})
        return block.model_copy(update={"file": fix(block.file, f"samples[{i}].file"), "join": join})

    samples = tuple(with_files(i, block) for i, block in enumerate(recipe.samples))
    target = recipe.target.model_copy(
        update={
            "file": fix(recipe.target.file, "target.file"),
            "land": fix(recipe.target.land, "target.land"),
        }
    )
    outputs = recipe.outputs.model_copy(
        update={"names": fix(recipe.outputs.names, "outputs.names"), "into": fix(recipe.outputs.into, "outputs.into")}
    )
    rim = recipe.rim
    if rim is not None:
        files = {key: fix(getattr(rim, key), f"rim.{key}") for key in ("parent", "parent_names")}
        sides = fix(rim.sides, "rim.sides") if isinstance(rim.sides, Path) else rim.sides
        rim = rim.model_copy(update={**files, "sides": sides})
    mobility = tuple(_absolute_condition(m, i, fix) for i, m in enumerate(recipe.mobility))
    output = fix(recipe.output, "output", must_exist=False)
    return recipe.model_copy(
        update={
            "samples": samples,
            "target": target,
            "rim": rim,
            "mobility": mobility,
            "outputs": outputs,
            "output": output,
        }
    )


def _absolute_condition(condition: Mobility, i: int, fix: Callable[[Path | None, str], Path | None]) -> Mobility:
    """A condition with absolute paths; values that end like a GeoTIFF become paths."""
    changes: dict[str, Any] = {"file": fix(condition.file, f"mobility[{i}].file")}
    for key in ("orbital_velocity_m_s", "period_s", "current_m_s", "depth_m"):
        value = getattr(condition, key)
        if isinstance(value, (str, Path)) and str(value).lower().endswith((".tif", ".tiff")):
            changes[key] = fix(Path(value), f"mobility[{i}].{key}")
    return condition.model_copy(update=changes)
