"""Put a names file to work on a bed, and undo it on reading."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.errors import RecipeError
from texture.output.bed_variables import BED_VARIABLES
from texture.output.halo import pad, unpad
from texture.output.names import Names, VariableName
from texture.output.on_demand import in_memory
from texture.output.units import Conversion, find_conversion, scaling

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["apply_names", "undo_names"]

DIAMETERS = ("grain_diameter", "mixture_median_diameter", "mixture_geometric_mean_diameter")
"""What may be asked for in phi."""

CELL_ORDER = "cell_dimensions"
"""Global attribute of a renamed bed: the grid's own order of dimensions, so that it can be read back."""

REFERENCES = (
    "coordinates", "bounds", "grid_mapping", "ancillary_variables", "mesh", "node_coordinates", "face_coordinates",
    "face_node_connectivity",
)  # fmt: skip
"""CF and UGRID attributes that hold names of other variables."""
DIMENSION_REFERENCES = ("face_dimension", "edge_dimension")
"""UGRID attributes that hold the name of a dimension."""


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
    cells = tuple(str(d) for d in dataset["water"].dims)
    dataset = _padded(in_memory(dataset), names, cells, where)
    land = dataset["water"].values == 0
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
        on_cells = set(cells) <= set(variable.dims) and name not in structural
        if names.values.land is not None and variable.dtype.kind == "f" and on_cells:
            variable = variable.copy()
            variable.values[..., land] = np.nan
            variable.encoding["_FillValue"] = names.values.land
        timed = on_cells and names.has_time(name)
        if names.has_time(name) and not on_cells and names.time and names.time.variables:
            raise RecipeError(f'{where}: time.variables: "{name}" does not lie on the cells')
        if spec is None or spec.split is None:
            pieces = {_plain_name(name, spec, names, name in dataset.sizes, where): variable}
        else:
            pieces = _split(name, variable, spec, classes, where)
        for new, piece in pieces.items():
            if new in made:
                raise RecipeError(f'{where}: two variables would be called "{new}"; give each its own name')
            new_names.setdefault(name, []).append(new)
            made[new] = _shaped(name, piece, spec, names, where, timed)
    labelled = [names.dimensions.get(d, d) for d in ("class", "layer", "condition")]
    made = _without_unused(made, labelled, new_names)
    for variable in made.values():
        _rewrite_references(variable, new_names, made, names.dimensions)
    _add_time(made, names, where)
    order = " ".join(names.dimensions.get(d, d) for d in cells)
    result = xr.Dataset(made, attrs={**dataset.attrs, CELL_ORDER: order})
    return result.set_coords([new for name in dataset.coords for new in new_names.get(str(name), []) if new in made])


def _structural(dataset: xr.Dataset) -> set[str]:
    """Coordinates, their bounds and the grid mapping: without them the file has no place on earth."""
    referred = {
        word
        for variable in dataset.variables.values()
        for attribute in ("bounds", "grid_mapping")
        for word in str(variable.attrs.get(attribute, "")).split()
    }
    mesh = {
        word
        for variable in dataset.variables.values()
        if "cf_role" in variable.attrs
        for key, value in variable.attrs.items()
        if key.endswith(("_coordinates", "_connectivity"))
        for word in str(value).split()
    } | {str(name) for name, variable in dataset.variables.items() if "cf_role" in variable.attrs}
    return {str(name) for name in dataset.coords} | referred | mesh


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


def _shaped(
    name: str, variable: xr.Variable, spec: VariableName | None, names: Names, where: str, timed: bool
) -> xr.Variable:
    import xarray as xr

    if timed:
        variable = xr.Variable(
            ("time", *variable.dims), variable.values[None], variable.attrs, encoding=dict(variable.encoding)
        )
    if spec is not None and spec.order is not None:
        order = spec.order if "time" in spec.order or not timed else ("time", *spec.order)
        if sorted(order) != sorted(str(d) for d in variable.dims):
            raise RecipeError(
                f"{where}: variables.{name}.order = {list(spec.order)}, expected its own dimensions in some order: "
                f"{[str(d) for d in variable.dims]}"
            )
        variable = variable.transpose(*order)
    values = variable.values
    attributes = dict(variable.attrs)
    if spec is not None and spec.units is not None:
        if values.dtype.kind != "f":
            raise RecipeError(f"{where}: variables.{name}.units: only measured values have one, not flags or names")
        values = _conversion(name, spec, where).there(values)
        attributes["units"] = spec.units
    if spec is not None:
        attributes |= spec.attributes
    renamed = names.dimensions if names.time is None else {**names.dimensions, "time": names.time.name}
    dimensions = tuple(renamed.get(str(d), str(d)) for d in variable.dims)
    return xr.Variable(dimensions, values, attributes, encoding=dict(variable.encoding))


def _conversion(name: str, spec: VariableName, where: str) -> Conversion:
    if spec.scale is not None:
        return scaling(spec.scale)
    ours = str(BED_VARIABLES.get(name, {}).get("units", ""))
    try:
        return find_conversion(ours, str(spec.units), name in DIAMETERS)
    except RecipeError as error:
        raise RecipeError(f"{where}: variables.{name}.{error}") from error


def _padded(dataset: xr.Dataset, names: Names, cells: tuple[str, ...], where: str) -> xr.Dataset:
    if names.halo is None:
        return dataset
    if len(cells) != 2:
        raise RecipeError(
            f"{where}: halo: this bed lies on {cells[0]} alone, without rows and columns to pad; leave it out"
        )
    return pad(dataset, cells, names.halo.cells, names.halo.fill, _structural(dataset))


def _add_time(made: dict[str, xr.Variable], names: Names, where: str) -> None:
    """The coordinate variable of the time dimension, where the names file gives it a value."""
    import xarray as xr

    if names.time is None:
        return
    taken = {str(d) for v in made.values() for d in v.dims if v.sizes[d] != 1}
    if names.time.name in made or names.time.name in taken:
        raise RecipeError(f'{where}: time.name: "{names.time.name}" is taken already; give time its own name')
    if names.time.units is not None:
        attributes = {"standard_name": "time", "long_name": "time of the starting bed", "units": names.time.units}
        made[names.time.name] = xr.Variable((names.time.name,), np.array([names.time.value]), attributes)


def _without_unused(
    made: dict[str, xr.Variable], dimensions: list[str], new_names: dict[str, list[str]]
) -> dict[str, xr.Variable]:
    """Drop `class_name`, `layer` and `condition_name` when nothing else is left on their dimension."""
    labels = {new for name in ("class_name", "layer", "condition_name") for new in new_names.get(name, [])}
    used = {d for name, variable in made.items() if name not in labels for d in variable.dims}
    unused = {d for d in dimensions if d not in used}
    return {n: v for n, v in made.items() if n not in labels or not unused.intersection(map(str, v.dims))}


def _rewrite_references(
    variable: xr.Variable, new_names: dict[str, list[str]], made: dict[str, xr.Variable], dimensions: dict[str, str]
) -> None:
    for attribute in DIMENSION_REFERENCES:
        if attribute in variable.attrs:
            variable.attrs[attribute] = dimensions.get(variable.attrs[attribute], variable.attrs[attribute])
    for attribute in REFERENCES:
        if attribute in variable.attrs:
            words = [new for old in variable.attrs[attribute].split() for new in new_names.get(old, []) if new in made]
            if words:
                variable.attrs[attribute] = " ".join(words)
            else:
                del variable.attrs[attribute]


def undo_names(dataset: xr.Dataset, names: Names) -> xr.Dataset:
    """Give a renamed bed our own names, order, units and layers from the top again, without time and halo.

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

    if names.time is not None and names.time.name in dataset.dims:
        dataset = dataset.isel({names.time.name: 0}, drop=True)
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
    cells = tuple(ours.get(d, d) for d in str(dataset.attrs.get(CELL_ORDER, "")).split())
    made = {name: _in_order(variable, cells) for name, variable in made.items()}
    result = xr.Dataset(made)
    result = result.set_coords(
        [n for n in ("class_name", "layer", "condition_name", "longitude", "latitude", "x", "y") if n in made]
    )
    if names.values.layer_order == "bottom_first" and "layer" in result.dims:
        result = result.isel(layer=slice(None, None, -1))
    return result if names.halo is None else unpad(result, cells, names.halo.cells)


def _in_order(variable: xr.Variable, cells: tuple[str, ...]) -> xr.Variable:
    """Classes, layers, others, then the cells in the grid's own order; what is not on the cells stays."""
    leading = [d for d in ("class", "layer", "condition") if d in variable.dims]
    if not cells or set(variable.dims) != {*leading, *cells}:
        return variable
    return variable.transpose(*leading, *cells)


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
    if spec is not None:
        attributes = {key: value for key, value in attributes.items() if key not in spec.attributes}
        if spec.units is not None:
            values = _conversion(own, spec, "names").back(values)
    return xr.Variable(dimensions, values, {**attributes, **BED_VARIABLES.get(own, {})})
