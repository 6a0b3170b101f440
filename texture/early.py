"""What can be told before the work: names, files and drawings that only the grid itself can judge."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from texture.recipe import Recipe
from texture.targets import Target

__all__ = ["check_early", "rim_cells"]


def check_early(recipe: Recipe, target: Target) -> None:
    """Find mistakes in the user's files and names now rather than after the estimate.

    Raises
    ------
    TextureError
        One of its leaves.
    """
    from texture.output import check_outputs

    check_outputs(target, recipe)
    rim_cells(recipe, target)


def rim_cells(recipe: Recipe, target: Target) -> NDArray[np.bool_] | None:
    """Cells that the file of `rim.sides` names, shape (n,); None where `sides` is no file."""
    if recipe.rim is None or not isinstance(recipe.rim.sides, Path):
        return None
    from texture.targets.drawn import drawn_cells

    return drawn_cells(recipe.rim.sides, target)
