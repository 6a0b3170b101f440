"""From the recipe's `[target]` block to a `Target`."""

from __future__ import annotations

from texture.recipe import TargetSettings
from texture.targets.target import Target

__all__ = ["read_target"]


def read_target(settings: TargetSettings) -> Target:
    """Read or make the cells to fill.

    Raises
    ------
    TargetError
        When the grid, its mask or its land cannot be used; the message names file and variable.
    """
    if settings.file is not None:
        from texture.targets.curvilinear import read_grid

        return read_grid(settings)
    from texture.targets.raster import make_raster

    return make_raster(settings)
