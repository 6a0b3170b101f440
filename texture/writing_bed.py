"""Write one bed: under the user's own names, as a table, and into a copy of the user's initial file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from texture.bed import Bed, Moved
    from texture.recipe import Recipe
    from texture.targets import Target

__all__ = ["write_bed"]


def write_bed(
    bed: Bed,
    target: Target,
    recipe: Recipe,
    path: Path,
    moved: Sequence[Moved] = (),
    into: bool = False,
    attributes: Mapping[str, Any] | None = None,
) -> None:
    """Write `path` (bed.nc) and what the recipe's outputs ask for beside it.

    Parameters
    ----------
    bed, target, recipe, moved
    path : path
    into : bool
        Also put the bed into a copy of `outputs.into`, where there is one.
    attributes : mapping, optional
        Further global attributes, such as a case's settings.
    """
    from texture.bed import single_fractions
    from texture.output import (
        apply_names,
        bed_dataset,
        read_names,
        stores_single,
        write_cells,
        write_into,
        write_netcdf,
    )

    outputs, cells = recipe.outputs, target.dims
    named = dataset = bed_dataset(bed, target, recipe, moved)
    dataset.attrs |= dict(attributes or {})
    if outputs.names is not None:
        names = read_names(outputs.names)
        named = apply_names(dataset, names, outputs.names.name)
        cells = tuple(names.dimensions.get(d, d) for d in cells)
    write_netcdf(named, path)
    if outputs.text:
        write_cells(path.with_suffix(".csv"), named, cells)
    if into and outputs.names is not None and outputs.into is not None:
        if stores_single(named, names, outputs.into):  # fractions sum to 1 as that file stores them
            values = single_fractions(dataset["class_fraction"].values)
            dataset["class_fraction"] = dataset["class_fraction"].copy(data=values)
            named = apply_names(dataset, names)
        write_into(named, names, outputs.into, path.parent / outputs.into.name, outputs.into_record)
