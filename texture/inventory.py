"""The sediment inventory of a run: the bed's tonnes by depth, with the map's own uncertainty."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.bed.inventory import Alike, Stock, depth_groups, take_stock

if TYPE_CHECKING:
    from texture.bed import Bed
    from texture.estimate import Estimate
    from texture.result import Validated

__all__ = ["bed_correlation", "make_inventory"]


def make_inventory(found: Validated, estimate: Estimate, bed: Bed) -> tuple[Stock, ...]:
    """Count the bed's tonnes by class and depth band; nothing for a list of places, which have no area."""
    target, recipe = found.target, found.recipe
    if target.kind == "points":
        return ()
    groups = depth_groups(target.active, target.depth_m, recipe.inventory.depth_bands_m)
    zones = found.mapper.zones
    if zones is not None:
        names = ["outside the zones", *(z.name for z in zones.settings)]
        for number, name in enumerate(names):
            own = depth_groups(
                target.active & (zones.cells.zone == number), target.depth_m, recipe.inventory.depth_bands_m
            )
            groups += [replace(g, zone=name if g.zone == "all" else f"{name}, {g.zone}") for g in own]
    return tuple(
        take_stock(
            bed, recipe.bed, target, estimate.fractions, estimate.quantiles, groups, bed_correlation(found), recipe.seed
        )
    )


def bed_correlation(found: Validated) -> Alike:
    """Correlation of the bed between cells, by the fitted structure.

    The largest among the mapped columns, each without its small-scale variation, which averages out inside cells. 0 where
    nothing has spatial structure.
    """
    target, plane, structure, space = found.target, found.plane, found.mapper.structure, found.mapper.space

    def alike(a: NDArray[np.int64], b: NDArray[np.int64]) -> NDArray[np.float64]:
        here, there = (space.at(plane.to_metres(target.longitude[i], target.latitude[i])).points for i in (a, b))
        result = np.where(a == b, 1.0, 0.0)
        for covariance in structure:
            smooth = covariance.sill - covariance.small_scale
            if smooth <= 0.0:
                continue
            distance = np.linalg.norm(covariance.metric(here) - covariance.metric(there), axis=1)
            covered = covariance.sill + covariance.noise - covariance.variogram(distance)
            result = np.maximum(result, np.where(a == b, 1.0, covered / smooth))
        return np.clip(result, 0.0, 1.0)

    return alike
