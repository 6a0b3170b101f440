"""Read a `bed.nc` back, also one that was written through a names file."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from texture.errors import BedError
from texture.output.names import Names, read_names
from texture.output.renaming import undo_names

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["open_bed"]


def open_bed(path: str | Path, names: Names | str | Path | None = None) -> xr.Dataset:
    """Open a bed with our own names and units, layers from the top.

    Parameters
    ----------
    path : path
    names : Names or path, optional
        The names file that the bed was written through.

    Returns
    -------
    xarray.Dataset
        In memory; the file is closed again.

    Raises
    ------
    BedError
        If the file is missing, no NetCDF, or holds no class fractions under these names.
    """
    import xarray as xr

    path = Path(path)
    if not path.is_file():
        raise BedError(f"{path}: no such file; expected a bed.nc")
    if isinstance(names, str | Path):
        names = read_names(Path(names))
    try:
        with xr.open_dataset(path, engine="netcdf4", decode_coords="all") as opened:
            dataset = opened.load()
    except (OSError, ValueError) as error:
        raise BedError(f"{path.name}: cannot be read as NetCDF ({error})") from error
    if names is not None:
        dataset = undo_names(dataset, names)
    if "class_fraction" not in dataset:
        known = ", ".join(str(name) for name in list(dataset.data_vars)[:6])
        raise BedError(
            f"{path.name}: has no variable class_fraction, found {known}; expected a bed of ours, or give the names "
            "file that it was written through"
        )
    return dataset
