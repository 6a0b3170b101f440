"""Values of the user's on the target's cells: a number, a NetCDF variable, a GeoTIFF."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError

if TYPE_CHECKING:
    import xarray as xr

    from texture.targets.target import Target

__all__ = ["LENGTH", "SPEED", "TIME", "read_field", "read_numbers"]

Floats = NDArray[np.float64]

SPEED = {"m s-1": 1.0, "m/s": 1.0, "m s^-1": 1.0, "m.s-1": 1.0, "cm s-1": 0.01, "cm/s": 0.01, "mm s-1": 0.001}
TIME = {"s": 1.0, "second": 1.0, "seconds": 1.0, "sec": 1.0}
LENGTH = {"m": 1.0, "metre": 1.0, "meter": 1.0, "metres": 1.0, "meters": 1.0, "cm": 0.01, "km": 1000.0}
"""Units that a file may have, and what makes them ours."""


def read_field(
    value: float | str | Path,
    file: Path | None,
    target: Target,
    key: str,
    units: Mapping[str, float],
    series: bool = False,
) -> Floats:
    """Read one value for each cell, or a series of them.

    Parameters
    ----------
    value : float, str or path
        A number for all cells, the name of a variable in `file`, or a GeoTIFF.
    file : path or None
        NetCDF file whose variables lie on the target's cells.
    target : Target
    key : str
        The recipe's key, for messages.
    units : mapping
        Units that the file may have, and factors to ours. A GeoTIFF has ours.
    series : bool
        Let a variable have one dimension more (time); one that has no other holds everywhere.

    Returns
    -------
    float array, shape (n,) or (times, n)
        NaN where the file has no value.

    Raises
    ------
    TargetError
        If the file cannot be read, has no such variable, other units, another shape or several times, or no
        value on any water cell.
    """
    if isinstance(value, (int, float)):
        return np.full(target.n_cells, float(value))
    if isinstance(value, Path):
        name, values = value.name, _sampled(value, target)
    else:
        assert file is not None  # the recipe has seen to it
        name, values = f'{file.name}: "{value}"', _variable(file, value, target, key, units, series)
    if not np.isfinite(values[..., target.active]).any():
        raise TargetError(f"{name}: has no value on any water cell of {target.name}, expected {key}")
    return values


def read_numbers(file: Path, name: str, target: Target, key: str) -> Floats:
    """Read one number without a unit for each cell, shape (n,), NaN where there is none; raises as `read_field`."""
    return _variable(file, name, target, key, None, False)


def _variable(
    file: Path, name: str, target: Target, key: str, units: Mapping[str, float] | None, series: bool
) -> Floats:
    import xarray as xr

    try:
        with xr.open_dataset(file, engine="netcdf4", decode_times=False, decode_timedelta=False) as dataset:
            if name not in dataset.variables:
                close = difflib.get_close_matches(name, [str(v) for v in dataset.variables], n=1, cutoff=0.5)
                known = ", ".join(str(v) for v in list(dataset.data_vars)[:8])
                hint = f'did you mean "{close[0]}"?' if close else f"it has {known}"
                raise TargetError(f'{file.name}: no variable "{name}" for {key}; {hint}')
            variable = dataset[name].squeeze(drop=True).load()
    except (OSError, ValueError) as error:
        if isinstance(error, TargetError):
            raise
        raise TargetError(f"{file.name}: cannot be read as NetCDF ({error})") from error
    if units is None:
        return _on_cells(variable, target, file.name, series)
    unit = str(variable.attrs.get("units", "")).strip()
    if unit not in units:
        found = f'is in "{unit}"' if unit else "does not say its units"
        raise TargetError(
            f'{file.name}: "{name}" {found}, expected {next(iter(units))} for {key}; set its attribute units'
        )
    return np.asarray(_on_cells(variable, target, file.name, series) * units[unit])


def _on_cells(variable: xr.DataArray, target: Target, name: str, series: bool) -> Floats:
    dims = tuple(d for d, length in zip(target.dims, target.shape, strict=True) if length > 1)
    shape = tuple(length for length in target.shape if length > 1)
    if set(variable.dims) == set(dims):
        variable = variable.transpose(*dims)
    if variable.shape == shape:
        return variable.to_numpy().astype(np.float64).ravel()
    times = [d for d in variable.dims if d not in dims]
    if series and len(times) == 1 and variable.ndim == 1:
        return np.broadcast_to(variable.to_numpy().astype(np.float64)[:, None], (variable.size, target.n_cells))
    if series and len(times) == 1 and set(variable.dims) == {*times, *dims}:
        values = variable.transpose(*times, *dims)
        if values.shape[1:] == shape:
            return values.to_numpy().astype(np.float64).reshape(values.shape[0], -1)
    again = "put it on the target's cells" if series else "choose one time, or put it on the target's cells"
    raise TargetError(
        f'{name}: "{variable.name}" has shape {dict(variable.sizes)}, expected one value for each cell of {target.name}, '
        f"{dict(zip(target.dims, target.shape, strict=True))}; {again}"
    )


def _sampled(path: Path, target: Target) -> Floats:
    """The pixel that each cell's centre lies in."""
    import pyproj
    import rasterio

    try:
        with rasterio.open(path) as image:
            if image.crs is None:
                raise TargetError(f"{path.name}: does not say its coordinate system; store it with one")
            to_image = pyproj.Transformer.from_crs(4326, image.crs.to_wkt(), always_xy=True)
            x, y = to_image.transform(target.longitude, target.latitude)
            good = np.isfinite(x) & np.isfinite(y)
            x, y, to_pixel = np.where(good, x, 0.0), np.where(good, y, 0.0), ~image.transform
            column = to_pixel.a * x + to_pixel.b * y + to_pixel.c
            row = to_pixel.d * x + to_pixel.e * y + to_pixel.f
            band = image.read(1, masked=True).astype(np.float64).filled(np.nan)
    except rasterio.errors.RasterioIOError as error:
        raise TargetError(f"{path.name}: cannot be read as a GeoTIFF ({error})") from error
    i, j = np.floor(row).astype(np.int64), np.floor(column).astype(np.int64)
    inside = good & (i >= 0) & (i < band.shape[0]) & (j >= 0) & (j < band.shape[1])
    values = np.full(target.n_cells, np.nan)
    values[inside] = band[i[inside], j[inside]]
    return values
