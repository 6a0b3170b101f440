"""The names file: the user's own names, order, units and land value for `bed.nc`."""

from __future__ import annotations

import difflib
import re
import string
import tomllib
from collections.abc import Iterable
from pathlib import Path
from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError, model_validator

from texture.errors import RecipeError
from texture.output.bed_variables import BED_VARIABLES

__all__ = ["Names", "VariableName", "read_names"]

NAME = r"^[A-Za-z][A-Za-z0-9_]*$"
PLACEHOLDERS = ("class", "number")


class _Strict(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)


class VariableName(_Strict):
    """How one variable is written.

    Attributes
    ----------
    name : str
        Theirs; with `split`, a template with `{class}` (its name) or `{number}` (from 1; `{number:02d}`).
    split : "class" or None
        One variable for each sediment class instead of a dimension.
    order : tuple of str, optional
        Our names of its dimensions in the order wanted, without the one that is split.
    units, scale
        What the values are multiplied by, and the unit that they then have.
    """

    name: str
    split: Literal["class"] | None = None
    order: tuple[str, ...] | None = None
    units: str | None = None
    scale: Annotated[float, Field(gt=0.0)] = 1.0

    @model_validator(mode="after")
    def _fits(self) -> VariableName:
        used = [field for _, field, _, _ in string.Formatter().parse(self.name) if field is not None]
        for field in used:
            if field not in PLACEHOLDERS:
                raise ValueError(f"name: unknown placeholder {{{field}}}; known: {{class}}, {{number}}")
        if self.split and not used:
            raise ValueError(
                f'name: "{self.name}" would be the same for every class; put {{class}} or {{number}} in it'
            )
        if used and not self.split:
            raise ValueError('name: has a placeholder, but split = "class" is missing')
        if not re.match(NAME, self.of("a", 1)):
            raise ValueError(f'name: "{self.name}" is no NetCDF name; use letters, digits and _, a letter first')
        if self.scale != 1.0 and self.units is None:
            raise ValueError("scale: give units beside it, or the file would tell the old ones")
        return self

    def of(self, class_name: str, number: int) -> str:
        """Return the name for one class, its number counted from 1."""
        return self.name.format(**{"class": class_name, "number": number})


class Values(_Strict):
    """What holds for the whole file.

    Attributes
    ----------
    land : float, optional
        Stands in land cells of all float variables, and is declared as their fill value.
    layer_order : {"top_first", "bottom_first"}
    only_named : bool
        Leave out variables that the names file does not list; coordinates stay.
    """

    land: float | None = None
    layer_order: Literal["top_first", "bottom_first"] = "top_first"
    only_named: bool = False


class Names(_Strict):
    """A names file, ours = theirs."""

    dimensions: dict[str, Annotated[str, Field(pattern=NAME)]] = Field(default_factory=dict)
    variables: dict[str, VariableName] = Field(default_factory=dict)
    values: Values = Values()

    def check(self, dimensions: Iterable[str], variables: Iterable[str], where: str = "names") -> None:
        """Check that what is renamed exists.

        Raises
        ------
        RecipeError
            Naming the nearest known name.
        """
        dimensions, variables = list(dimensions), list(variables)
        for name in self.dimensions:
            if name not in dimensions:
                raise RecipeError(f'{where}: dimensions: unknown "{name}"; {_nearest(name, dimensions)}')
        for name, spec in self.variables.items():
            if name not in variables:
                raise RecipeError(_unknown(where, name, variables))
            for dimension in spec.order or ():
                if dimension not in dimensions:
                    raise RecipeError(
                        f'{where}: variables.{name}.order: unknown "{dimension}"; {_nearest(dimension, dimensions)}'
                    )


def read_names(path: Path, cell_dimensions: Iterable[str] | None = None) -> Names:
    """Read a names file.

    Parameters
    ----------
    path : path
    cell_dimensions : iterable of str, optional
        The target's own dimensions; with them, unknown names are found before the bed is made.

    Raises
    ------
    RecipeError
        For a file that is missing or no TOML, unknown keys, or names that do not fit.
    """
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise RecipeError(f"{path.name}: cannot be read ({error.strerror}); expected a names file") from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise RecipeError(f"{path.name}: not TOML ({error})") from error
    try:
        names = Names.model_validate(content)
    except ValidationError as error:
        raise RecipeError(f"{path.name}: {_first(error)}") from error
    if cell_dimensions is not None:
        cells = list(cell_dimensions)
        coordinates = ["longitude", "latitude", "longitude_bounds", "latitude_bounds", "x", "y", "x_bounds", "y_bounds"]
        names.check(["class", "layer", "corner", *cells], [*BED_VARIABLES, *coordinates, "crs"], path.name)
    return names


def _first(error: ValidationError) -> str:
    # An unknown key explains a missing one, so it goes first.
    first = min(error.errors(), key=lambda e: e["type"] != "extra_forbidden")
    where = ".".join(str(key) for key in first["loc"])
    if first["type"] == "extra_forbidden":
        blocks: dict[str, type[BaseModel]] = {"variables": VariableName, "values": Values}
        model = blocks.get(str(first["loc"][0]), Names)
        return f'unknown key "{where}"; {_nearest(str(first["loc"][-1]), list(model.model_fields))}'
    if first["type"] == "model_type":
        return f'{where}: found {first["input"]!r}, expected a table such as {{ name = "bed_height" }}'
    message = first["msg"].removeprefix("Value error, ")
    return f"{where}: {message}"


def _unknown(where: str, name: str, known: list[str]) -> str:
    if name == "critical_stress_for_erosion":
        return (
            f'{where}: variables: "{name}" is not in this bed, because a class has no critical stress; '
            "give erosion.critical_stress_pa for every class, or leave the name out"
        )
    if name in BED_VARIABLES:
        return f'{where}: variables: "{name}" is not in this bed; leave the name out'
    return f'{where}: variables: unknown "{name}"; {_nearest(name, known)}'


def _nearest(word: str, known: list[str]) -> str:
    close = difflib.get_close_matches(word, known, n=1, cutoff=0.5)
    return f'did you mean "{close[0]}"?' if close else f"known: {', '.join(known)}"
