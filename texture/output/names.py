"""The names file: the user's own names, order, units and land value for `bed.nc`.

A names file is TOML, with the program's own names on the left and the model's on the right. Everything is optional, and
a name that is not known is an error with the nearest one that is. This one has every key (the model's words are invented)::

    [dimensions]                    # ours = theirs
    class = "sort"
    layer = "strat"
    row = "j"                       # y and x for rasters, and what the grid file itself calls them otherwise
    column = "i"

    [variables]                     # ours = how to write it; the list of ours is what `ncdump -h bed.nc` shows without names
    # One variable for each class instead of a dimension: {class} is its name, {number} counts from 1, {number:02d} as 01.
    class_fraction = { name = "share_{number:02d}", split = "class", order = ["layer", "row", "column"], units = "percent" }
    erodible_thickness = { name = "bed_height", units = "mm" }
    mixture_median_diameter = { name = "middle_size", units = "phi" }
    porosity = { name = "pores", attributes = { origin = "starting bed", part_number = 3 } }
    dry_density = { name = "packed_weight", units = "ounce per pint", scale = 0.01669 }    # any other unit: give its factor

    [time]                          # a dimension of length one in front of the variables listed above
    name = "tick"
    units = "hours since 2001-01-01 00:00"      # with units, a coordinate variable holds `value`
    value = 0.0
    variables = ["class_fraction"]  # only these; without it, all under [variables] that lie on cells

    [halo]                          # rows and columns around the grid
    cells = 1
    fill = "copy"                   # of the nearest cell; "land": as land cells

    [values]
    land = -9999.0                  # in land cells, declared as the fill value; without it land has the nearest water's bed
    layer_order = "bottom_first"
    only_named = true               # leave out what [variables] does not list

Units by name are those of `texture.output.units`: percent, mm, um and phi for grain diameters, g cm-3, mm s-1, …; `order`
names a variable's own dimensions, `time` among them if it is not to come first.
"""

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

__all__ = ["Halo", "Names", "Time", "VariableName", "read_names"]

NAME = r"^[A-Za-z][A-Za-z0-9_]*$"
PLACEHOLDERS = ("class", "number")


OWN_ATTRIBUTES = {
    "units": "use the key units beside it",
    "_FillValue": "use values.land",
    "missing_value": "use values.land",
    "scale_factor": "use the key scale beside it",
    "add_offset": "numbers are stored as they are",
    **dict.fromkeys(
        ("coordinates", "bounds", "grid_mapping", "ancillary_variables", "sediment_class", "mesh", "location",
         "flag_values", "flag_meanings"),
        "leave it out",
    ),
}  # fmt: skip
"""Attributes that are not the user's to set, and what to do instead."""


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
    units : str, optional
        The unit wanted, converted by its name.
    scale : float, optional
        What the values are multiplied by instead, for a unit that is not known by name.
    attributes : dict
        Further attributes, or other texts for `long_name` and the like.
    """

    name: str
    split: Literal["class"] | None = None
    order: tuple[str, ...] | None = None
    units: str | None = None
    scale: Annotated[float, Field(gt=0.0)] | None = None
    attributes: dict[str, str | int | float] = Field(default_factory=dict)

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
        if self.scale is not None and self.units is None:
            raise ValueError("scale: give units beside it, or the file would tell the old ones")
        for attribute in self.attributes:
            if attribute in OWN_ATTRIBUTES:
                raise ValueError(
                    f"attributes.{attribute}: belongs to the file's structure; {OWN_ATTRIBUTES[attribute]}"
                )
            if not re.match(NAME, attribute):
                raise ValueError(f'attributes: "{attribute}" is no name; use letters, digits and _, a letter first')
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


class Time(_Strict):
    """A time dimension of length one.

    Attributes
    ----------
    name : str
        Theirs, of the dimension and of its coordinate variable.
    units : str, optional
        Such as "days since 2000-01-01"; without it there is no coordinate variable.
    value : float
        What stands in it.
    variables : tuple of str, optional
        Ours; without it, all under `[variables]` that lie on cells.
    """

    name: Annotated[str, Field(pattern=NAME)]
    units: Annotated[str, Field(pattern=r"^(days|hours|minutes|seconds) since \d{4}-\d\d-\d\d")] | None = None
    value: float | None = None
    variables: tuple[str, ...] | None = None

    @model_validator(mode="after")
    def _value_has_units(self) -> Time:
        if (self.value is None) != (self.units is None):
            raise ValueError("give value and units together, or neither")
        return self


class Halo(_Strict):
    """Padding around the grid.

    Attributes
    ----------
    cells : int
        Added on each side.
    fill : {"copy", "land"}
        The nearest cell's values, or those of land.
    """

    cells: Annotated[int, Field(ge=1, le=50)]
    fill: Literal["copy", "land"] = "copy"


class Names(_Strict):
    """A names file, ours = theirs."""

    dimensions: dict[str, Annotated[str, Field(pattern=NAME)]] = Field(default_factory=dict)
    variables: dict[str, VariableName] = Field(default_factory=dict)
    time: Time | None = None
    halo: Halo | None = None
    values: Values = Values()

    @model_validator(mode="after")
    def _land_is_known(self) -> Names:
        if self.halo is not None and self.halo.fill == "land" and self.values.land is None:
            raise ValueError('halo.fill: "land" needs values.land, the number that stands on land')
        return self

    def has_time(self, name: str) -> bool:
        """Tell whether one of our variables gets the time dimension, as far as its name decides."""
        return self.time is not None and name in (
            self.variables if self.time.variables is None else self.time.variables
        )

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
                if dimension not in dimensions and not (dimension == "time" and self.has_time(name)):
                    raise RecipeError(
                        f'{where}: variables.{name}.order: unknown "{dimension}"; {_nearest(dimension, dimensions)}'
                    )
        for name in () if self.time is None else self.time.variables or ():
            if name not in variables:
                raise RecipeError(f'{where}: time.variables: unknown "{name}"; {_nearest(name, variables)}')


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
        dimensions = ["class", "layer", "condition", "corner", *cells]
        if cells[0].startswith("mesh_"):
            dimensions += ["mesh_face", "mesh_node", "mesh_corner"]
            coordinates += ["mesh", "mesh_face_nodes", "mesh_node_longitude", "mesh_node_latitude"]
        names.check(dimensions, [*BED_VARIABLES, *coordinates, "crs"], path.name)
    return names


def _first(error: ValidationError) -> str:
    # An unknown key explains a missing one, so it goes first.
    first = min(error.errors(), key=lambda e: e["type"] != "extra_forbidden")
    where = ".".join(str(key) for key in first["loc"])
    if first["type"] == "extra_forbidden":
        blocks: dict[str, type[BaseModel]] = {"variables": VariableName, "values": Values, "time": Time, "halo": Halo}
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
