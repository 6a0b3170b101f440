"""What a run will write, known before the work: so that a mistake in a name is told at once, not after an hour."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.bed import Account, Bed, Moved, Water, class_properties, strength_known
from texture.bed.mixture_packing import packer
from texture.errors import RecipeError
from texture.output.bed_nc import bed_dataset
from texture.output.folder import RESULTS
from texture.output.into import check_into
from texture.output.names import read_names
from texture.output.on_demand import is_on_demand
from texture.output.renaming import apply_names

if TYPE_CHECKING:
    import xarray as xr

    from texture.recipe import Recipe
    from texture.targets import Target

__all__ = ["bed_outline", "check_outputs"]


def bed_outline(target: Target, recipe: Recipe) -> xr.Dataset:
    """Lay out the bed that a run will make, with one cell along each of the target's dimensions.

    Every variable, dimension and attribute is the real one; values are not. Takes no memory worth speaking of.
    """
    import xarray as xr

    water = Water(recipe.bed.water.temperature_c, recipe.bed.water.salinity)
    classes = class_properties(recipe.bed.classes, water, recipe.composition.parts)
    k, layers, n = len(classes.names), len(recipe.bed.layers), target.n_cells
    flat = np.broadcast_to(0.5, (layers, n))
    bed = Bed(
        classes=classes,
        class_fraction=np.broadcast_to(0.5, (k, layers, n)),
        erodible_thickness=flat,
        class_critical_stress=np.broadcast_to(0.5, (k, layers)),
        evidence=np.broadcast_to(np.int8(1), (layers, n)),
        rim_weight=flat[0],
        pack=packer(recipe.bed.packing, classes, recipe.bed.layers),
        hidden=recipe.bed.hiding != "none",
        strong=strength_known(recipe.bed, classes, recipe.rim),
        account=Account({}, {}, {}, 0.0, 0, 0, ()),
    )
    moved = [
        Moved(m.name, False, flat[0], 0.5, 0.5, 0.0, dict.fromkeys(classes.names, 0.5), {}, flat[0] > 1.0, 0.5, 0.5)
        for m in recipe.mobility
    ]
    made = bed_dataset(bed, target, recipe, moved)
    cells = {
        name: xr.Variable(v.dims, np.full(_one_cell(v, target), 0.5, dtype=v.dtype), v.attrs)
        for name, v in made.variables.items()
        if is_on_demand(v)
    }
    return made.drop_vars(cells).isel({dim: slice(0, 1) for dim in target.dims}).assign(cells)


def check_outputs(target: Target, recipe: Recipe) -> None:
    """Check the names file and the initial file against the bed that will be made.

    Raises
    ------
    RecipeError
        For an unknown or doubled name, an order that does not fit, or an initial file of another shape.
    """
    outputs = recipe.outputs
    if outputs.names is None:
        return
    names = read_names(outputs.names, target.dims)
    named = apply_names(bed_outline(target, recipe), names, outputs.names.name)
    if outputs.into is None:
        return
    if outputs.into.name in RESULTS:
        raise RecipeError(
            f'outputs.into: "{outputs.into.name}" is what the program calls a file of its own; rename your initial file'
        )
    if outputs.into.parent == recipe.output.resolve():
        raise RecipeError(
            f'outputs.into: "{outputs.into.name}" lies in the output folder, where its copy will be put; '
            "keep your own file elsewhere"
        )
    own = {names.dimensions.get(dim, dim): length for dim, length in zip(target.dims, target.shape, strict=True)}
    lengths = {dim: named.sizes[dim] - 1 + length for dim, length in own.items() if dim in named.sizes}
    check_into(named, names, outputs.into, outputs.into_record, lengths)


def _one_cell(variable: xr.Variable, target: Target) -> tuple[int, ...]:
    return tuple(1 if d in target.dims else length for d, length in zip(variable.dims, variable.shape, strict=True))
