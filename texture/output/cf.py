"""What every NetCDF file of ours shares: global attributes, fill values, compression, writing."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

import texture
from texture.errors import OutputError
from texture.output.on_demand import is_on_demand, on_demand

if TYPE_CHECKING:
    import xarray as xr

    from texture.targets import Target

__all__ = ["FILL", "flags", "global_attributes", "on_cells", "on_cells_later", "write_netcdf"]

FILL = 9.969209968386869e36
"""NetCDF's own default fill value for floats."""


def flags(meanings: Mapping[int, str], dtype: type = np.int8) -> dict[str, Any]:
    """CF attributes of a flag variable; CF allows letters, digits and a few signs, no brackets.

    >>> flags({1: "rim", 2: "filled under land"})["flag_meanings"]
    'rim filled_under_land'
    """
    words = [meaning.replace(" ", "_") for meaning in meanings.values()]
    return {"flag_values": np.array(list(meanings), dtype=dtype), "flag_meanings": " ".join(words)}


def global_attributes(
    title: str, summary: str, comment: str, references: str, credits: Iterable[str | None] = ()
) -> dict[str, str]:
    """Global attributes of CF-1.11, and the data credits as ACDD-1.3 names them.

    `history` carries no date: the same inputs make the same bytes. Dates and the inputs' hashes are in
    provenance.json.
    """
    return {
        "Conventions": "CF-1.11",
        "title": title,
        "institution": "not stated",
        "source": summary,
        "history": f"made by Seabed Texture {texture.__version__}; inputs and settings are in provenance.json beside this file",
        "references": references,
        "comment": comment,
        **({"acknowledgement": thanks} if (thanks := "; ".join(dict.fromkeys(c for c in credits if c))) else {}),
    }


def on_cells(target: Target, leading: tuple[str, ...], values: Any, labels: str = "", **attributes: Any) -> xr.Variable:
    """A data variable on the target's dimensions, from flat values with leading dimensions.

    Parameters
    ----------
    target : Target
    leading : tuple of str
        Names of the dimensions before the cells'.
    values : array, shape (*leading, n)
    labels : str
        Further coordinates to name in the CF attribute, such as "class_name".
    **attributes
        CF attributes.
    """
    import xarray as xr

    array = np.asarray(values)
    shaped = array.reshape(*array.shape[:-1], *target.shape)
    return xr.Variable((*leading, *target.dims), shaped, _with_coordinates(target, labels, attributes))


def on_cells_later(
    target: Target, leading: Mapping[str, int], make: Callable[[], NDArray[Any]], labels: str = "", **attributes: Any
) -> xr.Variable:
    """A variable as `on_cells` makes it, of double precision, whose values `make` works out when they are written.

    Parameters
    ----------
    target, labels, **attributes
        As for `on_cells`.
    leading : mapping of str to int
        Names and lengths of the dimensions before the cells'.
    make : callable
        Returns the flat values, shape (*leading, n).
    """
    shape = (*leading.values(), *target.shape)
    attrs = _with_coordinates(target, labels, attributes)
    variable = on_demand((*leading, *target.dims), make, shape, np.float64, attrs)
    variable.encoding["_FillValue"] = None  # a bed has no holes
    return variable


def _with_coordinates(target: Target, labels: str, attributes: Mapping[str, Any]) -> dict[str, Any]:
    own = dict(target.data_attributes)
    coordinates = " ".join(filter(None, [own.pop("coordinates", ""), labels]))
    if coordinates:
        own["coordinates"] = coordinates
    return {**attributes, **own}


def write_netcdf(dataset: xr.Dataset, path: Path) -> None:
    """Write a dataset as compressed NetCDF-4; the same dataset gives the same bytes.

    Float variables with NaN get a fill value; others get none, so that a reader sees there are no holes.

    Raises
    ------
    OutputError
        If the file cannot be written.
    """
    import xarray as xr

    encoding: dict[str, dict[str, Any]] = {}
    filled: dict[str, xr.Variable] = {}
    for name, variable in dataset.variables.items():
        own: dict[str, Any] = {"_FillValue": None}
        if variable.dtype.kind == "f" and "_FillValue" in variable.encoding:
            own["_FillValue"] = variable.encoding["_FillValue"]
        elif variable.dtype.kind == "f" and name not in dataset.coords and np.isnan(variable.values).any():
            # Filled one variable at a time while it is written; left to xarray, all would be copied before the first.
            filled[str(name)] = _filled(variable)
            del own["_FillValue"]
        if variable.size > 1000 and variable.dtype.kind in "fiu":
            own |= {"zlib": True, "complevel": 2, "shuffle": True}
        encoding[str(name)] = own
    whole = dataset.assign(filled)
    later = [str(name) for name, variable in whole.variables.items() if is_on_demand(variable)]
    try:
        first = {name: own for name, own in encoding.items() if name not in later}
        whole.drop_vars(later).to_netcdf(path, engine="netcdf4", format="NETCDF4", encoding=first)
        # One at a time: xarray works out all variables of a dataset before it writes the first.
        for name in later:
            one = xr.Dataset({name: whole.variables[name]})
            one.to_netcdf(path, mode="a", engine="netcdf4", format="NETCDF4", encoding={name: encoding[name]})
    except RuntimeError as error:  # the HDF5 library's way to say that the disk is full or read-only
        raise OutputError(f"{path.name}: cannot be written ({error}); is the disk full?") from error


def _filled(variable: xr.Variable) -> xr.Variable:
    fill = variable.dtype.type(FILL)

    def make() -> NDArray[Any]:
        values = variable.values
        return np.where(np.isnan(values), fill, values)

    made = on_demand(variable.dims, make, variable.shape, variable.dtype, {**variable.attrs, "_FillValue": fill})  # type: ignore[arg-type]
    made.encoding = dict(variable.encoding)
    return made
