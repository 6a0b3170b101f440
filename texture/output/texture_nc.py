"""`texture.nc`: the map itself, before any rim, as a CF NetCDF file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Protocol

import numpy as np
from numpy.typing import NDArray

from texture.bed.bed import EVIDENCE
from texture.output.cf import flags, global_attributes, on_cells

if TYPE_CHECKING:
    import xarray as xr

    from texture.recipe import Recipe
    from texture.targets import Target

__all__ = ["QUANTILES", "MapArrays", "texture_dataset"]

Floats = NDArray[np.float64]
AnyFloats = NDArray[np.floating]

QUANTILES = (0.05, 0.5, 0.95)
MAP_EVIDENCE = {code: EVIDENCE[code] for code in (0, 1, 2, 4, 5, 6)}
"""The map has no rim."""
COMMENT = (
    "Seabed texture is meant in the sense of grain size. Expected fractions of dry mass, averaged over each cell, "
    "interpolated from grab samples: smoother than any real bed. Grab samples under-sample rock and gravel and lose "
    "fines. Not for navigation, foundations or permits."
)
REFERENCES = (
    "Aitchison (1986), The Statistical Analysis of Compositional Data. Matheron (1963), Economic Geology 58, 1246-1266."
)


class MapArrays(Protocol):
    """The map as flat arrays over n cells; NaN or 0 outside the water. See `texture.estimate.Estimate`."""

    @property
    def fractions(self) -> Floats:
        """Expected cell means, shape (n, parts)."""

    @property
    def quantiles(self) -> AnyFloats:
        """Quantiles of the cell mean, shape (3, n, parts); NaN for a method without a variance."""

    @property
    def mean(self) -> AnyFloats:
        """Log-ratio coordinates, shape (n, d)."""

    @property
    def variance(self) -> AnyFloats:
        """Their variance at a point of the bed, shape (n, d); NaN for a method without one."""

    @property
    def evidence(self) -> NDArray[np.int8]:
        """Keys of `EVIDENCE`, shape (n,)."""

    @property
    def texture_class(self) -> NDArray[np.int8]:
        """Number of the class, 0 where there is no map, shape (n,)."""

    @property
    def sample_distance_m(self) -> NDArray[np.float32]:
        """From each cell's centre to the nearest sample, shape (n,)."""

    @property
    def expected_error(self) -> NDArray[np.float32]:
        """Root mean square error to expect, shape (n,); NaN where it is not known."""

    @property
    def class_probability(self) -> AnyFloats:
        """Of that class, shape (n,)."""


def texture_dataset(
    estimate: MapArrays,
    target: Target,
    recipe: Recipe,
    class_words: Mapping[int, str],
    coordinate_names: Sequence[str],
    attributes: Mapping[str, str] | None = None,
) -> xr.Dataset:
    """Lay the map out as a CF dataset on the target's dimensions.

    Parameters
    ----------
    estimate : MapArrays
    target : Target
    recipe : Recipe
        Title, parts and method for the attributes.
    class_words : mapping of int to str
        Number of each texture class and its name in words.
    coordinate_names : sequence of str, length d
        What each log-ratio coordinate is, such as "ln(mud / (sand + gravel))".
    attributes : mapping, optional
        Further global attributes, such as the partition and the support of a cell value.

    Returns
    -------
    xarray.Dataset
        `<part>_fraction`, `<part>_fraction_quantile` (where the method has a variance), `texture_class` and
        its probability, `evidence`, `sample_distance`, `expected_error`, `logratio_<i>` and `logratio_<i>_variance`.
    """
    parts = recipe.composition.parts
    with_variance = bool(np.isfinite(estimate.variance[target.active]).any())
    variables: dict[str, xr.Variable] = {}
    for i, part in enumerate(parts):
        variables[f"{part}_fraction"] = on_cells(
            target, (), estimate.fractions[:, i], long_name=f"expected fraction of {part} by dry mass", units="1",
            cell_methods="area: mean", ancillary_variables="evidence",
        )  # fmt: skip
        if with_variance:
            variables[f"{part}_fraction_quantile"] = on_cells(
                target, ("quantile",), estimate.quantiles[..., i],
                long_name=f"quantile of the cell mean of the fraction of {part} by dry mass", units="1",
            )  # fmt: skip
    variables |= _classes(estimate, target, class_words)
    variables["sample_distance"] = on_cells(
        target, (), estimate.sample_distance_m, long_name="distance to the nearest sample", units="m"
    )
    variables["expected_error"] = on_cells(
        target, (), estimate.expected_error, units="1",
        long_name="root mean square error of the fractions that held-out samples as far from the others had",
    )  # fmt: skip
    for i, name in enumerate(coordinate_names):
        variables[f"logratio_{i + 1}"] = on_cells(
            target, (), estimate.mean[:, i], long_name=f"kriged coordinate {name}", units="1"
        )
        if with_variance:
            variables[f"logratio_{i + 1}_variance"] = on_cells(
                target, (), estimate.variance[:, i], long_name=f"variance of {name} at a point of the bed", units="1"
            )
    dataset = target.coordinates().assign(variables)
    if with_variance:
        coordinate = {"long_name": "probability of a smaller cell mean", "units": "1"}
        dataset = dataset.assign_coords(quantile=("quantile", np.array(QUANTILES), coordinate))
    method = recipe.method.name.replace("_", " ")
    # What was kriged, not what the recipe asked for: held-out error may have picked shares or presence.
    source = f"{method} of {', '.join(coordinate_names)} from grab samples on {target.name}"
    dataset.attrs = {
        **global_attributes(recipe.title, source, COMMENT, REFERENCES, (s.credit for s in recipe.samples)),
        **dataset.attrs,  # the target's own: UGRID's convention, the type of feature of points
        **(attributes or {}),
    }
    return dataset


def _classes(estimate: MapArrays, target: Target, class_words: Mapping[int, str]) -> dict[str, xr.Variable]:
    return {
        "texture_class": on_cells(
            target, (), estimate.texture_class.astype(np.int8), long_name="most probable texture class",
            ancillary_variables="texture_class_probability", **flags({0: "no map", **class_words}),
        ),
        "texture_class_probability": on_cells(
            target, (), estimate.class_probability, long_name="probability of the most probable texture class",
            units="1",
        ),
        "evidence": on_cells(
            target, (), estimate.evidence.astype(np.int8), long_name="what supports the map in the cell",
            **flags(MAP_EVIDENCE),
        ),
    }  # fmt: skip
