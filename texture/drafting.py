"""A starting recipe from files of samples and a grid, for a person to read through."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from texture.errors import RecipeError, TargetError
from texture.placing import on_sphere
from texture.recipe import TargetSettings
from texture.stations.draft import draft_recipe
from texture.stations.plausible import DepthAt
from texture.targets import Target, read_target
from texture.targets.water import knows_land

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

__all__ = ["draft"]

RIM = """
# A coarse rim along the open boundary. Choose its width and bed, and take the # away.
# [rim]
# sides = "open"
# width_cells = 6
# classes = { sand = 1.0 }
"""
ZONES = """
# Places with a bed of their own, such as a dredged channel or a river that nobody sampled.
# [[zones]]
# name = "channel"
# polygons = "channel.geojson"   # or variable = "zone", values = [2] on the grid
# kind = "stations"              # its own stations alone; "mean"; or "given", with composition = { sand = 1.0 }
"""
COVARIATES = """
# Mud often follows depth and shore. Whether they help here, held-out error says: take the # away, run texture validate, and look at
# kriging_with_covariates beside kriging; to map with them, set distance = "with_covariates" under [method].
# [[method.covariates]]
# name = "depth"                 # of this grid; transform = "log" counts shallow steps for more
"""
SHORE = """\
# [[method.covariates]]
# name = "shore_distance"        # from this grid's land
"""
COMPARE = """\
# [validation]
# compare = ["nearest", "inverse_distance", "kriging", "kriging_with_covariates"{}]
"""
UNSURE = ("every cell is taken as water", "does not say what its values mean")  # words of a target's notes
CLASSES = """
# The bed gets one class for each part unless [[bed.classes]] says more. Settling, threshold and erosion of
# mud are not in grain size: give them there, or the model will have to be told.

# [outputs]
# figures = true            # every map and diagnostic as PNG and PDF for a paper
# [report]
# stations = "hidden"       # where positions of samples are confidential: none on the page and in the figures
"""


def draft(
    files: Sequence[str | Path], recipe_path: str | Path, grid: str | Path | None = None, overwrite: bool = False
) -> str:
    """Look at files of samples (and a grid) and write a recipe that names everything recognised and every doubt.

    Parameters
    ----------
    files : sequence of path
    recipe_path : path
        Where the recipe is written; the paths in it are relative to its folder.
    grid : path, optional
        Grid of the model; without one a raster around the stations is proposed.
    overwrite : bool
        Replace a recipe that is there.

    Returns
    -------
    text : str
        What was written.

    Raises
    ------
    RecipeError
        If the recipe exists and `overwrite` is off, or a file is missing.
    SampleError
        If none of the files can be read.
    """
    recipe_path = Path(recipe_path)
    if recipe_path.exists() and not overwrite:
        raise RecipeError(f"{recipe_path}: exists already; use --overwrite to replace it, or choose another name")
    for path in (*files, *([grid] if grid is not None else [])):
        if not Path(path).is_file():
            raise RecipeError(f"{path}: no such file")
    target, problem = _look_at(grid)
    extent = target.bounds if target is not None else None
    depth_at = _depth_at(target) if target is not None else None
    text = draft_recipe(files, recipe_path.absolute().parent, grid, extent, depth_at=depth_at)
    text += _grid_lines(target, problem) + _covariate_lines(target) + ZONES + RIM + CLASSES
    aside = recipe_path.with_name(f".{recipe_path.name}.new")
    aside.write_text(text, encoding="utf-8")
    aside.replace(recipe_path)
    return text


def _look_at(grid: str | Path | None) -> tuple[Target | None, str]:
    if grid is None:
        return None, ""
    try:
        return read_target(TargetSettings(file=Path(grid))), ""
    except TargetError as error:
        return None, str(error)


def _depth_at(target: Target) -> DepthAt | None:
    """The grid's depth at the nearest cell of any place; NaN on land and more than a cell off the grid; None without depths."""
    if target.depth_m is None:
        return None
    import numpy as np
    from scipy.spatial import KDTree

    located = np.flatnonzero(np.isfinite(target.longitude) & np.isfinite(target.latitude))
    tree = KDTree(on_sphere(target.longitude[located], target.latitude[located]))
    depth = np.where(target.active, target.depth_m, np.nan)[located]
    side = np.sqrt(target.area_m2[located])

    def depth_at(longitude: Floats, latitude: Floats) -> Floats:
        distance, cell = tree.query(on_sphere(longitude, latitude))
        return np.where(distance <= side[cell], depth[cell], np.nan)

    return depth_at


def _covariate_lines(target: Target | None) -> str:
    """Propose what the grid itself can give, as comments."""
    if target is None or target.depth_m is None:
        return ""
    land = knows_land(target)
    return COVARIATES + SHORE * land + COMPARE.format(', "kriging_in_water"' if land else "")


def _grid_lines(target: Target | None, problem: str) -> str:
    if target is None:
        return f"# DOUBT: {problem}\n" if problem else ""
    lines = [
        f"# {target.size_text}, {int(target.active.sum()):,} of them water, found by the file's own attributes",
        *(f"# {'DOUBT: ' if any(words in note for words in UNSURE) else ''}{note}" for note in target.notes),
        *(f"# outer edge {i}, {opening}" for i, opening in enumerate(target.openings, start=1)),
    ]
    return "\n".join(lines) + "\n"
