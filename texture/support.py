"""Where the samples support the map: how unlike every station a place is, and what error goes with that.

Meyer & Pebesma (2021), Methods in Ecology and Evolution 12, 1620-1633: a place lies within the area of applicability when it is no less
like the stations than held-out stations were like those that predicted them. Likeness is distance in what the method sees
places by: the plane, ways through water, covariates. A covariate that is a coordinate counts by its fitted range, as the method itself
weighs it; one that the mean or a forest follows counts as much in its own standard deviations as position does in its.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.validation.expected_error import ErrorCurve
from texture.validation.reach import validated_reach_m

if TYPE_CHECKING:
    from texture.space import Space
    from texture.structure import CovarianceSet
    from texture.validation.folds import Folds
    from texture.validation.held_out import HeldOut

__all__ = ["Support", "find_support"]

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Support:
    """Distances to the samples, in the plane and in likeness, and what follows from them.

    Attributes
    ----------
    stations : float array, shape (n, 2)
        In the plane.
    space : Space
        Of the map's method.
    scales : float array, shape (covariates,)
        Metres that one unit of each covariate stands for.
    reach_m : float
        Likeness up to which held-out stations have tested the map.
    curve : ErrorCurve
        Error to expect at a distance in likeness.
    """

    stations: Floats
    space: Space
    scales: Floats
    reach_m: float
    curve: ErrorCurve

    @property
    def beyond_text(self) -> str:
        """What is said of water that the samples do not support."""
        reach = f"{self.reach_m / 1000:.1f} km"
        if self.scales.size:
            return f"is less like every sample, in place and covariates, than {reach} away: the most that held-out samples tested"
        return f"is further than {reach} from any sample" + ("" if self.space.flat else " by the way through water")

    @cached_property
    def _trees(self) -> tuple[Any, Any]:
        from scipy.spatial import KDTree

        return KDTree(self.stations), KDTree(coordinates(self.space, self.scales, self.stations))

    def among(self, which: NDArray[np.bool_]) -> Support:
        """The same with some of the stations only."""
        return replace(self, stations=self.stations[which])

    def at(self, points: Floats) -> tuple[Floats, Floats]:
        """Distance to the nearest station in the plane, and unlikeness to the most like one; metres, shapes (m,)."""
        plane, like = self._trees
        distance: Floats = plane.query(points)[0]
        if self.space.flat and self.scales.size == 0:
            return distance, distance
        return distance, like.query(coordinates(self.space, self.scales, points))[0]


def coordinates(space: Space, scales: Floats, points: Floats) -> Floats:
    """Places (m, d) of the plane in coordinates whose distance is unlikeness, metres."""
    seen = space.at(points)
    named = [seen.points[:, : seen.points.shape[1] - len(space.axis_names)]]
    covariates = [seen.points[:, seen.points.shape[1] - len(space.axis_names) :]]
    if seen.drift is not None:
        covariates.append(seen.drift[:, [i for i, name in enumerate(space.drift) if name not in ("x", "y")]])
    return np.column_stack([*named, np.column_stack(covariates) * scales])


def find_support(
    space: Space, structure: CovarianceSet, stations: Floats, folds: Folds, observed: Floats, held: HeldOut
) -> Support:
    """From the folds and held-out predictions of the map's method.

    Parameters
    ----------
    space : Space
    structure : CovarianceSet
        As the method fitted it; its scales weigh covariates that are coordinates.
    stations : float array, shape (n, 2)
    folds : Folds
    observed : float array, shape (n, parts)
        NaN where not to be scored.
    held : HeldOut
    """
    axes = len(space.axis_names)
    fitted = [c.axis_scales[-axes:] for c in structure if axes and c.axis_scales is not None]
    own = np.mean(fitted, axis=0) if fitted else np.full(axes, _spread(stations))
    followed = sum(name not in ("x", "y") for name in space.drift)
    scales = np.concatenate([own, np.full(followed, _spread(stations))])
    distance = folds.held_out_distances(coordinates(space, scales, stations))
    curve = ErrorCurve.learn(distance, observed, held.predicted)
    return Support(stations, space, scales, validated_reach_m(distance), curve)


def _spread(stations: Floats) -> float:
    """Standard deviation of position along one direction, metres."""
    return float(np.sqrt(stations.var(axis=0).mean()))
