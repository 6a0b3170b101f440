"""`members.nc` and `members_summary.nc`: equally likely beds, and what they say together."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.bed import single_fractions
from texture.errors import OutputError
from texture.output.bed_nc import bed_dataset
from texture.output.cf import FILL, flags, global_attributes, on_cells, write_netcdf

if TYPE_CHECKING:
    import xarray as xr

    from texture.bed import Bed
    from texture.recipe import Recipe
    from texture.targets import Target

__all__ = ["NOT_A_BED", "REALIZATION", "summary_dataset", "write_members"]

Floats = NDArray[np.float64]

NOT_A_BED = (
    "A map of a quantile, of a mean or of a probability is not itself a possible bed: no bed is low everywhere at once. Start "
    "models from single members, or from the shifted beds of a sensitivity set."
)
REALIZATION = {"standard_name": "realization", "long_name": "number of the member", "units": "1"}
SAME_IN_ALL = ("erodible_thickness", "evidence", "rim_weight", "water")
COMMENT = (
    "Members are equally likely beds given the samples and the fitted structure (Matheron's rule). Each is as rough as the bed "
    "is between cells; small-scale variation averages out inside a cell. Seeded: a member is the same whatever their number. "
    + NOT_A_BED
)
REFERENCES = "Journel and Huijbregts (1978), Mining Geostatistics. Chiles and Delfiner (2012), Geostatistics."


def write_members(path: Path, target: Target, recipe: Recipe, beds: Iterable[tuple[int, Bed]], count: int) -> None:
    """Write members one after the other along `realization`; memory holds one bed.

    Parameters
    ----------
    path : path
    target, recipe
    beds : iterable of (number, Bed)
        Rimmed and closed. What all members share (thickness, evidence, rim, classes) is taken from the first.
    count : int

    Raises
    ------
    OutputError
        If the file cannot be written.
    """
    import netCDF4

    single = recipe.outputs.precision == "float32"
    for place, (number, bed) in enumerate(beds):
        if place == 0:
            _write_frame(path, target, recipe, bed)
        try:
            with netCDF4.Dataset(path, "a") as file:
                fraction = _grown(file, target, count, single) if place == 0 else file["class_fraction"]
                values = single_fractions(bed.class_fraction) if single else bed.class_fraction
                fraction[place] = values.reshape(*values.shape[:2], *target.shape)
                file["realization"][place] = number
        except RuntimeError as error:  # the HDF5 library's way to say that the disk is full
            raise OutputError(f"{path.name}: cannot be written ({error}); is the disk full?") from error


def _write_frame(path: Path, target: Target, recipe: Recipe, bed: Bed) -> None:
    """What is the same in all members."""
    whole = bed_dataset(bed, target, recipe)
    keep = [
        str(name) for name, v in whole.data_vars.items() if name in SAME_IN_ALL or not set(v.dims) & set(target.dims)
    ]
    frame = whole[keep]
    frame.attrs["comment"] = COMMENT
    frame.attrs["references"] = f"{REFERENCES} {whole.attrs['references']}"
    write_netcdf(frame, path)


def _grown(file: Any, target: Target, count: int, single: bool) -> Any:
    """Add the variables that differ between members."""
    file.createDimension("realization", count)
    own = file.createVariable("realization", "i4", ("realization",))
    own.setncatts(REALIZATION)
    dims = ("realization", "class", "layer", *target.dims)
    sizes = [1, len(file.dimensions["class"]), 1, *target.shape]
    # A chunk is one member's layer, cut along the first dimension of the cells to some 4 MB.
    sizes[3] = max(1, min(target.shape[0], int(500_000 * target.shape[0] / (sizes[1] * target.n_cells)) or 1))
    kind = "f4" if single else "f8"
    fraction = file.createVariable(
        "class_fraction", kind, dims, zlib=True, complevel=2, shuffle=True, chunksizes=sizes, fill_value=False
    )
    own_attributes = dict(target.data_attributes)
    coordinates = " ".join(filter(None, [own_attributes.pop("coordinates", ""), "class_name"]))
    fraction.setncatts({
        "long_name": "fraction of the dry mass of the bed in each sediment class", "units": "1", "cell_methods": "area: mean",
        "coordinates": coordinates, **own_attributes,
    })  # fmt: skip
    return fraction


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
