"""From the recipe's `[target]` block to a `Target`."""

from __future__ import annotations

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets.places import VECTOR_SUFFIXES, read_places
from texture.targets.target import Target

__all__ = ["read_target"]


def read_target(settings: TargetSettings) -> Target:
    """Read or make the cells to fill.

    Raises
    ------
    TargetError
        When the grid, its mask or its land cannot be used; the message names file and variable.
    """
    if settings.file is None:
        from texture.targets.raster import make_raster

        return make_raster(settings)
    suffix = settings.file.suffix.lower()
    if settings.variable is not None and suffix in VECTOR_SUFFIXES | {".tif", ".tiff", ".csv", ".txt", ".tsv"}:
        raise TargetError(
            f"target.variable chooses among the coordinates of a NetCDF grid, and {settings.file.name} is none; leave it out"
        )
    if suffix in {".tif", ".tiff"}:
        from texture.targets.raster import read_template

        return read_template(settings)
    if suffix in VECTOR_SUFFIXES | {".csv", ".txt", ".tsv"}:
        return read_places(settings)
    from texture.targets.netcdf import read_netcdf

    return read_netcdf(settings)
