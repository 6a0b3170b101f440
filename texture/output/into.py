"""Put the bed into a copy of the user's own initial file, everything else untouched."""

from __future__ import annotations

import shutil
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from texture.errors import OutputError, RecipeError
from texture.output.names import Names

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["check_into", "stores_single", "write_into"]


def check_into(
    bed: xr.Dataset, names: Names, source: Path, record: int | None = None, lengths: Mapping[str, int] | None = None
) -> dict[str, tuple[Any, ...]]:
    """Check that every variable of the names file fits into the initial file.

    Parameters
    ----------
    bed : xarray.Dataset
        Through the names file already (`apply_names`).
    names : Names
        Its `[variables]` are what is replaced.
    source : path
        The user's file.
    record : int, optional
        Which record to fill, from 0, where the file's variable has one dimension more (time); needed when it
        has several.
    lengths : mapping, optional
        Lengths of dimensions that count instead of the bed's own, when `bed` is only an outline.

    Returns
    -------
    dict
        Name of each variable and the index of the part of it that is filled.

    Raises
    ------
    RecipeError
        If the file cannot be read, a variable is absent, its dimensions or their lengths differ, or its type
        cannot hold the values.
    """
    import netCDF4

    bed = _without_time(bed, names)
    wanted = _wanted(bed, names)
    if not wanted:
        raise RecipeError(f"{source.name}: the names file lists no variable of the bed to put into it")
    try:
        file = netCDF4.Dataset(source)
    except OSError as error:
        raise RecipeError(f"{source.name}: cannot be read as NetCDF ({error.strerror or error})") from error
    with file:
        return {
            name: _place(name, bed.variables[name], file, source.name, record, lengths or bed.sizes) for name in wanted
        }


def stores_single(bed: xr.Dataset, names: Names, source: Path) -> bool:
    """Tell whether the user's file keeps any part of the bed in single precision."""
    import netCDF4

    with netCDF4.Dataset(source) as file:
        return any(file.variables[name].dtype == np.float32 for name in _wanted(bed, names))


def write_into(bed: xr.Dataset, names: Names, source: Path, path: Path, record: int | None = None) -> None:
    """Copy the user's file and replace the bed in the copy.

    Parameters
    ----------
    bed, names, source, record
        As for `check_into`.
    path : path
        The copy. Values are stored in the type, packing and fill value that the user's file has; attributes
        are not touched.

    Raises
    ------
    RecipeError
        As for `check_into`.
    OutputError
        If a packed variable comes back as other numbers than were put in: its integers are too few for them.
    """
    import netCDF4

    places = check_into(bed, names, source, record)
    bed = _without_time(bed, names)
    shutil.copyfile(source, path)
    with netCDF4.Dataset(path, "r+") as file:
        for name, index in places.items():
            values = bed.variables[name].values
            if values.dtype.kind == "f":
                values = np.ma.masked_invalid(values)  # land, where the names file gave it a value
            theirs = file.variables[name]
            theirs[index] = values
            if theirs.dtype.kind in "iu" and values.dtype.kind == "f":
                _check_packing(theirs, index, values, source.name)


def _check_packing(theirs: Any, index: tuple[Any, ...], values: Any, source: str) -> None:
    theirs.set_always_mask(True)
    step = abs(float(getattr(theirs, "scale_factor", 1.0)))
    off = np.abs(theirs[index] - values)
    if off.count() != values.count() or (off.count() and float(off.max()) > 0.51 * step):
        raise OutputError(
            f'{source}: "{theirs.name}" is packed as {theirs.dtype} with scale_factor {step:g} and cannot hold values from '
            f"{float(values.min()):.4g} to {float(values.max()):.4g}; give it floating point numbers"
        )


def _without_time(bed: xr.Dataset, names: Names) -> xr.Dataset:
    """Their file has its own times; the record says which one."""
    return bed if names.time is None or names.time.name not in bed.dims else bed.isel({names.time.name: 0}, drop=True)


def _wanted(bed: xr.Dataset, names: Names) -> list[str]:
    """Names in the file of what the names file lists; coordinates stay the user's own."""
    listed = set()
    for own, spec in names.variables.items():
        if spec.split:
            labels = {str(n): v.attrs.get("sediment_class") for n, v in bed.variables.items()}
            listed |= {n for n, label in labels.items() if label and n in _of_all(spec, label, len(bed.variables))}
        elif own not in bed.coords:
            listed.add(spec.name)
    return [str(name) for name in bed.data_vars if name in listed]


def _of_all(spec: Any, label: str, most: int) -> set[str]:
    return {spec.of(label, i + 1) for i in range(most)}


def _place(
    name: str, variable: xr.Variable, file: Any, source: str, record: int | None, sizes: Mapping[Any, int]
) -> tuple[Any, ...]:
    if name not in file.variables:
        known = ", ".join(list(file.variables)[:8])
        raise RecipeError(f'{source}: has no variable "{name}", found {known}; correct the names file')
    theirs = file.variables[name]
    lengths = dict(zip(theirs.dimensions, theirs.shape, strict=True))
    extra = [d for d in theirs.dimensions if d not in variable.dims]
    if [d for d in theirs.dimensions if d in variable.dims] != list(variable.dims) or len(extra) > 1:
        raise RecipeError(
            f'{source}: "{name}" lies on {list(theirs.dimensions)}, the bed\'s on {[str(d) for d in variable.dims]}; '
            "give dimensions and order in the names file"
        )
    for dimension in variable.dims:
        length = sizes.get(dimension, variable.sizes[dimension])
        if lengths[str(dimension)] != length:
            raise RecipeError(
                f'{source}: "{name}" has {lengths[str(dimension)]} along {dimension}, the bed has {length}; '
                "it was made for another grid or other classes or layers"
            )
    if extra and lengths[extra[0]] > 1 and record is None:
        raise RecipeError(
            f'{source}: "{name}" has {lengths[extra[0]]} records along {extra[0]}; say which one to fill, from 0'
        )
    if extra and not 0 <= (record or 0) < lengths[extra[0]]:
        raise RecipeError(
            f'{source}: "{name}" has {lengths[extra[0]]} records along {extra[0]}, asked for {record or 0} (from 0)'
        )
    if theirs.dtype.kind not in "fiu" or (
        theirs.dtype.kind in "iu" and variable.dtype.kind == "f" and "scale_factor" not in theirs.ncattrs()
    ):
        raise RecipeError(
            f'{source}: "{name}" is stored as {theirs.dtype}, which cannot hold fractions of a unit; '
            "give it floating point numbers, or a scale_factor"
        )
    return tuple((record or 0) if d in extra else slice(None) for d in theirs.dimensions)
