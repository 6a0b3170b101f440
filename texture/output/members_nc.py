"""`members.nc` and `members_summary.nc`: equally likely beds, and what they say together."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import OutputError
from texture.output.bed_nc import bed_dataset
from texture.output.bed_variables import BED_VARIABLES
from texture.output.cf import FILL, flags, global_attributes, on_cells, write_netcdf

if TYPE_CHECKING:
    import xarray as xr

    from texture.bed import Bed
    from texture.recipe import Recipe
    from texture.targets import Target

__all__ = ["NOT_A_BED", "REALIZATION", "summary_dataset", "write_members", "write_stack"]

Floats = NDArray[np.float64]

NOT_A_BED = (
    "A map of a quantile, of a mean or of a probability is not itself a possible bed: no bed is low everywhere at once. Start "
    "models from single members, or from the shifted beds of a sensitivity set."
)
REALIZATION = {"standard_name": "realization", "long_name": "number of the member", "units": "1"}
SAME_IN_CASES = ("water", "layer", "class_share", "class_kind", "erosion_form")
SAME_IN_ALL = ("erodible_thickness", "evidence", "rim_weight", "water")
COMMENT = (
    "Members are equally likely beds given the samples and the fitted structure (Matheron's rule). Each is as rough as the bed "
    "is between cells; small-scale variation averages out inside a cell. Seeded: a member is the same whatever their number. "
    + NOT_A_BED
)
REFERENCES = "Journel and Huijbregts (1978), Mining Geostatistics. Chiles and Delfiner (2012), Geostatistics."


def write_members(
    path: Path, target: Target, recipe: Recipe, beds: Iterable[tuple[int, Bed]], numbers: Sequence[int]
) -> None:
    """Write members one after the other along `realization`; memory holds one bed.

    Parameters
    ----------
    path : path
    target, recipe
    beds : iterable of (number, Bed)
        Rimmed and closed. What all members share (thickness, evidence, rim, classes) is taken from the first.
    numbers : sequence of int
        Which members there will be, in the order they stand.

    Raises
    ------
    OutputError
        If the file cannot be written.
    """
    attributes = {"comment": COMMENT, "references": REFERENCES}
    write_stack(
        path, target, ((n, recipe, bed) for n, bed in beds), numbers, ("class_fraction",), SAME_IN_ALL, attributes
    )


def write_stack(
    path: Path,
    target: Target,
    beds: Iterable[tuple[int, Recipe, Bed]],
    numbers: Sequence[int],
    differ: tuple[str, ...] | None = None,
    same: tuple[str, ...] = SAME_IN_CASES,
    attributes: Mapping[str, str] | None = None,
) -> None:
    """Write beds one after the other along `realization`.

    Parameters
    ----------
    path : path
    target : Target
    beds : iterable of (number, Recipe, Bed)
        In any order.
    numbers : sequence of int
        In the order they stand.
    differ : tuple of str, optional
        Variables along `realization`; every variable of a bed that is not in `same`, where it is not given.
    same : tuple of str
        Variables of the cells that are taken from the first bed. Those of the classes are too, unless they differ.
    attributes : mapping, optional
        Global attributes instead of the bed's own.
    """
    import netCDF4

    own: tuple[str, ...] = differ or ()
    for order, (number, recipe, bed) in enumerate(beds):
        place = list(numbers).index(number)
        whole = bed_dataset(bed, target, recipe)
        if differ is None and order == 0:
            own = tuple(n for n in BED_VARIABLES if n in whole and n not in same and whole[n].dtype.kind in "fi")
        try:
            if order == 0:
                cells = set(target.dims)
                kept = [
                    n for n, v in whole.data_vars.items() if n not in own and (n in same or not set(v.dims) & cells)
                ]
                frame = whole[kept]
                frame.attrs |= dict(attributes or {})
                write_netcdf(frame, path)
            with netCDF4.Dataset(path, "a") as file:
                if order == 0:
                    file.createDimension("realization", len(numbers))
                    file.createVariable("realization", "i4", ("realization",)).setncatts(REALIZATION)
                for name in own:
                    if order == 0:
                        _grow(file, name, whole[name], target)
                    file[name][place] = whole[name].values
                file["realization"][place] = number
        except RuntimeError as error:  # the HDF5 library's way to say that the disk is full
            raise OutputError(f"{path.name}: cannot be written ({error}); is the disk full?") from error


def _grow(file: Any, name: str, like: xr.DataArray, target: Target) -> None:
    """Add a variable that differs between the beds."""
    for dim, length in like.sizes.items():
        if dim not in file.dimensions:
            file.createDimension(dim, length)
    sizes = [1, *like.shape]
    if target.dims[0] in like.dims:
        # A chunk is one bed, cut along the first dimension of the cells to some 4 MB.
        axis = 1 + like.dims.index(target.dims[0])
        sizes[axis] = max(1, min(like.sizes[target.dims[0]], 500_000 * like.sizes[target.dims[0]] // max(like.size, 1)))
    holes = like.dtype.kind == "f" and bool(np.isnan(like.values).any())
    made = file.createVariable(
        name, like.dtype, ("realization", *like.dims), zlib=True, complevel=2, shuffle=True, chunksizes=sizes,
        fill_value=like.dtype.type(FILL) if holes else False,
    )  # fmt: skip
    coordinates = like.encoding.get("coordinates")
    made.setncatts(like.attrs | ({"coordinates": coordinates} if coordinates else {}))


def summary_dataset(summary: Any, target: Target, recipe: Recipe, class_words: Mapping[int, str]) -> xr.Dataset:
    """Lay out what the members say together.

    Parameters
    ----------
    summary : MemberSummary
        See `texture.member_summary`.
    target, recipe
    class_words : mapping of int to str
        Number of each texture class and its name in words, in the scheme's order.
    """
    variables: dict[str, xr.Variable] = {}
    for i, part in enumerate(recipe.composition.parts):
        words = f"fraction of {part} by dry mass in the cell"
        variables[f"{part}_fraction_mean"] = on_cells(
            target, (), summary.mean[:, i], long_name=f"mean over the members of the {words}", units="1",
            cell_methods="realization: mean area: mean",
        )  # fmt: skip
        variables[f"{part}_fraction_sd"] = on_cells(
            target, (), summary.sd[:, i], long_name=f"standard deviation over the members of the {words}", units="1",
            cell_methods="realization: standard_deviation area: mean",
        )  # fmt: skip
        variables[f"{part}_fraction_quantile"] = on_cells(
            target, ("quantile",), summary.quantiles[..., i], long_name=f"quantile over the members of the {words}",
            units="1", comment="not itself a possible bed",
        )  # fmt: skip
        if part in summary.above and summary.above[part][0]:
            variables[f"{part}_above_probability"] = on_cells(
                target, (f"{part}_limit",), summary.above[part][1], units="1",
                long_name=f"share of the members in which the {words} exceeds the limit",
            )  # fmt: skip
    variables["texture_class_share"] = on_cells(
        target, ("texture_class",), summary.class_probability, units="1",
        long_name="share of the members in which the cell mean is of the texture class",
    )  # fmt: skip
    coordinates: dict[str, Any] = {
        "quantile": ("quantile", np.array(summary.levels), {"long_name": "probability of a smaller cell mean", "units": "1"}),
        "texture_class": (
            "texture_class", np.array(list(class_words), dtype=np.int8), {"long_name": "texture class", **flags(class_words)},
        ),
    }  # fmt: skip
    for part, (limits, _) in summary.above.items():
        if limits:
            coordinates[f"{part}_limit"] = (
                f"{part}_limit", np.array(limits), {"long_name": f"limit of the fraction of {part}", "units": "1"},
            )  # fmt: skip
    dataset = target.coordinates().assign(variables).assign_coords(coordinates)
    source = f"{summary.count} members by {summary.method}, conditioned on grab samples, on {target.name}"
    dataset.attrs = {
        **global_attributes(recipe.title, source, NOT_A_BED, REFERENCES), **dataset.attrs, "members": np.int32(summary.count),
    }  # fmt: skip
    for variable in dataset.data_vars.values():
        if variable.dtype.kind == "f":
            variable.encoding["_FillValue"] = FILL
    return dataset
