"""Maps of further numbers: variables of texture.nc, and a GeoTIFF for each."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

import numpy as np
from numpy.typing import NDArray

from texture.output.cf import flags, on_cells
from texture.output.geotiff import pixel_grid, write_geotiff
from texture.output.texture_nc import MAP_EVIDENCE, QUANTILES

if TYPE_CHECKING:
    import xarray as xr

    from texture.recipe import Quantity
    from texture.targets import Target

__all__ = ["QuantityArrays", "quantity_geotiffs", "with_quantities"]

Floats = NDArray[np.float64]
CF_UNITS = {"phi": "1", "%": "percent", "‰": "1e-3", "per mille": "1e-3", "ppm": "1e-6", "ppb": "1e-9", "": "1"}
"""What UDUNITS has no word for; phi is a logarithm, which has no unit."""


class QuantityArrays(Protocol):
    """A map as flat arrays over n cells. See `texture.quantities.QuantityMap`."""

    @property
    def mean(self) -> Floats:
        """Expected cell means, shape (n,)."""

    @property
    def quantiles(self) -> Floats:
        """Quantiles of the cell mean, shape (3, n); NaN for a method without a variance."""

    @property
    def evidence(self) -> NDArray[np.int8]:
        """What supports each cell, shape (n,)."""


def with_quantities(
    dataset: xr.Dataset, maps: Sequence[tuple[Quantity, QuantityArrays]], target: Target, support: str
) -> xr.Dataset:
    """Add `<name>`, `<name>_quantile` and `<name>_evidence` of each quantity to the map's dataset.

    Parameters
    ----------
    dataset : xarray.Dataset
        As `texture_dataset` made it; its `quantile` coordinate serves here too.
    maps : sequence of (Quantity, QuantityArrays)
    target : Target
    support : str
        What a value of a cell stands for.
    """
    variables: dict[str, xr.Variable] = {}
    for quantity, arrays in maps:
        name, said = quantity.name, quantity.name.replace("_", " ")
        units = CF_UNITS.get(quantity.units, quantity.units)
        about = {"units": units, "scale": quantity.scale}
        if units != quantity.units:
            about["unit_as_given"] = quantity.units
        variables[name] = on_cells(
            target, (), arrays.mean, long_name=f"expected {said}", cell_methods="area: mean",
            ancillary_variables=f"{name}_evidence", support=support, **about,
        )  # fmt: skip
        if np.isfinite(arrays.quantiles).any():
            variables[f"{name}_quantile"] = on_cells(
                target, ("quantile",), arrays.quantiles, long_name=f"quantile of the cell mean of {said}",
                support="cell mean: small-scale variation averages out inside the cell", **about,
            )  # fmt: skip
        variables[f"{name}_evidence"] = on_cells(
            target, (), arrays.evidence, long_name=f"what supports the map of {said} in the cell", **flags(MAP_EVIDENCE)
        )
    return dataset.assign(variables)


def quantity_geotiffs(
    folder: Path,
    maps: Sequence[tuple[Quantity, QuantityArrays]],
    target: Target,
    cell_size_m: float | None = None,
) -> None:
    """Write `<name>.tif` and its quantiles `<name>_q05.tif` … of each quantity into a folder that exists."""
    grid = pixel_grid(target, cell_size_m)
    for quantity, arrays in maps:
        said, units = quantity.name.replace("_", " "), quantity.units
        write_geotiff(folder / f"{quantity.name}.tif", grid, arrays.mean, f"expected {said}", units=units)
        for q, values in zip(QUANTILES, arrays.quantiles, strict=True):
            if np.isfinite(values).any():
                path = folder / f"{quantity.name}_q{round(100 * q):02d}.tif"
                write_geotiff(path, grid, values, f"quantile {q:g} of the cell mean of {said}", units=units)
