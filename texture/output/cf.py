"""What every NetCDF file of ours shares: global attributes, fill values, compression, writing."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

import texture
from texture.errors import OutputError

if TYPE_CHECKING:
    import xarray as xr

    from texture.targets import Target

__all__ = ["FILL", "flags", "global_attributes", "on_cells", "write_netcdf"]

FILL = 9.969209968386869e36
"""NetCDF's own default fill value for floats."""


def flags(meanings: Mapping[int, str], dtype: type = np.int8) -> dict[str, Any]:
    """CF attributes of a flag variable; CF allows letters, digits and a few signs, no brackets.

    >>> flags({1: "rim", 2: "filled under land"})["flag_meanings"]
    'rim filled_under_land'
    """
    words = [meaning.replace(" ", "_") for meaning in meanings.values()]
    return {"flag_values": np.array(list(meanings), dtype=dtype), "flag_meanings": " ".join(words)}


def global_attributes(title: str, summary: str, comment: str, references: str) -> dict[str, str]:
    """Global attributes of CF-1.11.

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
    own = dict(target.data_attributes)
    coordinates = " ".join(filter(None, [own.pop("coordinates", ""), labels]))
    if coordinates:
        own["coordinates"] = coordinates
    shaped = array.reshape(*array.shape[:-1], *target.shape)
    return xr.Variable((*leading, *target.dims), shaped, {**attributes, **own})


def write_netcdf(dataset: xr.Dataset, path: Path) -> None:
    """Write a dataset as compressed NetCDF-4; the same dataset gives the same bytes.

    Float variables with NaN get a fill value; others get none, so that a reader sees there are no holes.

    Raises
    ------
    OutputError
        If the file cannot be written.
    """
    encoding: dict[str, dict[str, Any]] = {}
    for name, variable in dataset.variables.items():
        own: dict[str, Any] = {"_FillValue": None}
        if variable.dtype.kind == "f" and "_FillValue" in variable.encoding:
            own["_FillValue"] = variable.encoding["_FillValue"]
        elif variable.dtype.kind == "f" and name not in dataset.coords and np.isnan(variable.values).any():
            own["_FillValue"] = variable.dtype.type(FILL)
        if variable.size > 1000 and variable.dtype.kind in "fiu":
            own |= {"zlib": True, "complevel": 2, "shuffle": True}
        encoding[str(name)] = own
    try:
        dataset.to_netcdf(path, engine="netcdf4", format="NETCDF4", encoding=encoding)
    except RuntimeError as error:  # the HDF5 library's way to say that the disk is full or read-only
        raise OutputError(f"{path.name}: cannot be written ({error}); is the disk full?") from error
