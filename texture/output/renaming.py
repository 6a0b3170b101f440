"""Put a names file to work on a bed, and undo it on reading."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.errors import RecipeError
from texture.output.bed_variables import BED_VARIABLES
from texture.output.names import Names, VariableName

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["apply_names", "undo_names"]

REFERENCES = ("coordinates", "bounds", "grid_mapping", "ancillary_variables")
"""CF attributes that hold names of other variables."""


def apply_names(dataset: xr.Dataset, names: Names, where: str = "names") -> xr.Dataset:
    """Rename, split, reorder and scale a bed as a names file says.

    Parameters
    ----------
    dataset : xarray.Dataset
        As `bed_dataset` makes it.
    names : Names
    where : str
        Name of the file, for messages.

    Returns
    -------
    xarray.Dataset
        Coordinates, bounds and the grid mapping stay, under their new names if they have one.

    Raises
    ------
    RecipeError
        If a name is unknown, given twice, or an order does not fit its variable.
    """
    import xarray as xr

    names.check([str(d) for d in dataset.sizes], [str(v) for v in dataset.variables], where)
    land = dataset["water"].values == 0
    cells = dataset["water"].dims
    if names.values.layer_order == "bottom_first":
        dataset = dataset.isel(layer=slice(None, None, -1))
    classes = [str(c) for c in dataset["class_name"].values]
    structural = _structural(dataset)
    made: dict[str, xr.Variable] = {}
    new_names: dict[str, list[str]] = {}
    for key, variable in dataset.variables.items():
        name = str(key)
        spec = names.variables.get(name)
        if spec is None and names.values.only_named and name not in structural:
            continue
        on_cells = variable.dims[-len(cells) :] == cells and name not in structural
        if names.values.land is not None and variable.dtype.kind == "f" and on_cells:
            variable = variable.copy()
            variable.values[..., land] = np.nan
            variable.encoding["_FillValue"] = names.values.land
        if spec is None or spec.split is None:
            pieces = {_plain_name(name, spec, names, name in dataset.sizes, where): variable}
        else:
            pieces = _split(name, variable, spec, classes, where)
        for new, piece in pieces.items():
            if new in made:
                raise RecipeError(f'{where}: two variables would be called "{new}"; give each its own name')
            new_names.setdefault(name, []).append(new)
            made[new] = _shaped(name, piece, spec, names, where)
    made = _without_unused(
        made, [names.dimensions.get("class", "class"), names.dimensions.get("layer", "layer")], new_names
    )
    for variable in made.values():
        _rewrite_references(variable, new_names, made)
    result = xr.Dataset(made, attrs=dataset.attrs)
    return result.set_coords([new for name in dataset.coords for new in new_names.get(str(name), []) if new in made])


def _structural(dataset: xr.Dataset) -> set[str]:
    """Coordinates, their bounds and the grid mapping: without them the file has no place on earth."""
    referred = {
        word
        for variable in dataset.variables.values()
        for attribute in ("bounds", "grid_mapping")
        for word in str(variable.attrs.get(attribute, "")).split()
    }
    return {str(name) for name in dataset.coords} | referred


def _plain_name(name: str, spec: VariableName | None, names: Names, is_dimension: bool, where: str) -> str:
    """A dimension and the coordinate variable that bears its name are renamed together."""
    if not is_dimension:
        return name if spec is None else spec.name
    by_dimension = names.dimensions.get(name, name)
    if spec is not None and spec.name != by_dimension:
        raise RecipeError(
            f'{where}: "{name}" is a dimension called "{by_dimension}" and a variable called "{spec.name}"; '
            "a coordinate variable has its dimension's name"
        )
    return by_dimension


def _split(
    name: str, variable: xr.Variable, spec: VariableName, classes: list[str], where: str
) -> dict[str, xr.Variable]:
    if "class" not in variable.dims:
        raise RecipeError(f'{where}: variables.{name}: has no dimension "class" to split; leave split out')
    pieces: dict[str, xr.Variable] = {}
    for i, label in enumerate(classes):
        piece = variable.isel({"class": i}).copy()
        piece.attrs = {
            **variable.attrs,
            "long_name": f"{variable.attrs['long_name']}: {label}",
            "sediment_class": label,
        }
        words = [w for w in str(piece.attrs.pop("coordinates", "")).split() if w != "class_name"]
        if words:
            piece.attrs["coordinates"] = " ".join(words)
        new = spec.of(label, i + 1)
        if new in pieces:
            raise RecipeError(
                f'{where}: variables.{name}: two classes would be called "{new}"; put {{class}} in the name'
            )
        pieces[new] = piece
    return pieces


def _shaped(name: str, variable: xr.Variable, spec: VariableName | None, names: Names, where: str) -> xr.Variable:
    import xarray as xr

    if spec is not None and spec.order is not None:
        if sorted(spec.order) != sorted(str(d) for d in variable.dims):
            raise RecipeError(
                f"{where}: variables.{name}.order = {list(spec.order)}, expected its own dimensions in some order: "
                f"{[str(d) for d in variable.dims]}"
            )
        variable = variable.transpose(*spec.order)
    values = variable.values
    attributes = dict(variable.attrs)
    if spec is not None and spec.scale != 1.0:
        if values.dtype.kind != "f":
            raise RecipeError(
                f"{where}: variables.{name}.scale: only measured values can be scaled, not flags or names"
            )
        values = values * spec.scale
    if spec is not None and spec.units is not None:
        attributes["units"] = spec.units
    dimensions = tuple(names.dimensions.get(str(d), str(d)) for d in variable.dims)
    return xr.Variable(dimensions, values, attributes, encoding=dict(variable.encoding))


def _without_unused(
    made: dict[str, xr.Variable], dimensions: list[str], new_names: dict[str, list[str]]
) -> dict[str, xr.Variable]:
    """Drop `class_name` and `layer` when nothing else is left on their dimension."""
    labels = {new for name in ("class_name", "layer") for new in new_names.get(name, [])}
    used = {d for name, variable in made.items() if name not in labels for d in variable.dims}
    unused = {d for d in dimensions if d not in used}
    return {n: v for n, v in made.items() if n not in labels or not unused.intersection(map(str, v.dims))}


def _rewrite_references(variable: xr.Variable, new_names: dict[str, list[str]], made: dict[str, xr.Variable]) -> None:
    for attribute in REFERENCES:
        if attribute in variable.attrs:
            words = [new for old in variable.attrs[attribute].split() for new in new_names.get(old, []) if new in made]
            if words:
                variable.attrs[attribute] = " ".join(words)
            else:
                del variable.attrs[attribute]


def undo_names(dataset: xr.Dataset, names: Names) -> xr.Dataset:
    """Give a renamed bed our own names, order, units and layers from the top again.

    Parameters
    ----------
    dataset : xarray.Dataset
        As read from the file.
    names : Names

    Returns
    -------
    xarray.Dataset
        Land cells are NaN where the names file had a land value; variables that it left out are absent.
    """
    import xarray as xr

    ours = {theirs: own for own, theirs in names.dimensions.items()}
    made: dict[str, xr.Variable] = {}
    taken: set[str] = set()
    for own, spec in names.variables.items():
        found = _pieces(dataset, spec)
        if not found:
            continue
        taken.update(found)
        variables = [dataset.variables[name] for name in found]
        made[own] = _restored(own, _joined(variables) if spec.split else variables[0], spec, ours)
        if spec.split and "class_name" not in made:
            labels = [str(v.attrs.get("sediment_class", n)) for n, v in zip(found, variables, strict=True)]
            made["class_name"] = xr.Variable(("class",), np.array(labels, dtype=object))
    for name, variable in dataset.variables.items():
        if name not in taken:
            own = ours.get(str(name), str(name))
            made[own] = _restored(own, variable, None, ours)
    result = xr.Dataset(made)
    result = result.set_coords([n for n in ("class_name", "layer", "longitude", "latitude", "x", "y") if n in made])
    if names.values.layer_order == "bottom_first" and "layer" in result.dims:
        result = result.isel(layer=slice(None, None, -1))
    return result


def _pieces(dataset: xr.Dataset, spec: VariableName) -> list[str]:
    """Names in the file that a name or template stands for, in the file's order."""
    if not spec.split:
        return [spec.name] if spec.name in dataset.variables else []
    labels = {
        str(name): str(variable.attrs["sediment_class"])
        for name, variable in dataset.variables.items()
        if "sediment_class" in variable.attrs
    }
    return [name for name, label in labels.items() if name in {spec.of(label, i + 1) for i in range(len(labels))}]


def _joined(variables: list[xr.Variable]) -> xr.Variable:
    import xarray as xr

    values = np.stack([variable.values for variable in variables])
    return xr.Variable(("class", *variables[0].dims), values, variables[0].attrs)


def _restored(own: str, variable: xr.Variable, spec: VariableName | None, ours: dict[str, str]) -> xr.Variable:
    import xarray as xr

    dimensions = tuple(ours.get(str(d), str(d)) for d in variable.dims)
    values, attributes = variable.values, dict(variable.attrs)
    if spec is not None and spec.scale != 1.0:
        values = values / spec.scale
    if own in BED_VARIABLES and "units" in BED_VARIABLES[own]:
        attributes["units"] = BED_VARIABLES[own]["units"]
    restored = xr.Variable(dimensions, values, attributes)
    leading = [d for d in ("class", "layer") if d in dimensions]
    if spec is not None and spec.order is not None:
        # Row and column, or y and x: the order of rows before columns is the names file's own statement.
        cells = [d for d in ("row", "y", "column", "x") if d in dimensions]
        return restored.transpose(*leading, *cells)
    return restored
