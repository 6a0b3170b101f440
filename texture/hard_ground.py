"""Where the bed is rock or cannot erode: a probability from stations that found hard ground, and polygons as they are given."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.zones import Share

if TYPE_CHECKING:
    from texture.result import Validated

__all__ = ["hard_ground_probability", "indicator_map"]

Floats = NDArray[np.float64]
CELLS_AT_ONCE = 100_000
FEWEST = 5  # stations that show any structure, as for the composition


def hard_ground_probability(found: Validated) -> Floats | None:
    """Probability of hard ground in each cell, shape (n,); None where neither a station nor a polygon tells of any.

    Stations that found hard ground count as 1 and those with a measured sample as 0; their indicator is kriged, in each zone
    from the stations that are heard there, and across a soft edge it fades into the map around. Inside the polygons of `bed.hard_ground` it is 1.
    """
    from texture.targets.zones import inside, polygon_area

    target, recipe, table = found.target, found.recipe, found.stations.table
    rock = np.flatnonzero((table["kind"] == "hard_ground").to_numpy())
    if rock.size == 0 and recipe.bed.hard_ground is None:
        return None
    probability = np.zeros(target.n_cells)
    if rock.size:
        rows = np.concatenate([rock, found.observations.rows[found.observations.measured]])
        here = found.plane.to_metres(*(table[c].to_numpy()[rows] for c in ("longitude", "latitude")))
        hard = (np.arange(rows.size) < rock.size).astype(np.float64)
        zones, cells = found.mapper.zones, np.flatnonzero(target.active)
        maps: dict[int, Callable[[Floats], Floats]] = {}
        for start in range(0, cells.size, CELLS_AT_ONCE):
            some = cells[start : start + CELLS_AT_ONCE]
            place = found.plane.to_metres(target.longitude[some], target.latitude[some])
            share = Share.nowhere(some.size) if zones is None else zones.cells.take(some)
            for number, own, weight in share.layers():
                if number not in maps:
                    heard = np.ones(rows.size, dtype=bool) if zones is None else zones.heard(number, rows)
                    maps[number] = indicator_map(here[heard], hard[heard])
                probability[some[own]] += weight * maps[number](place[own])
    if recipe.bed.hard_ground is not None:
        area = polygon_area(recipe.bed.hard_ground)
        probability[inside(area, target.longitude, target.latitude) & target.active] = 1.0
    return probability


def indicator_map(points: Floats, indicator: Floats) -> Callable[[Floats], Floats]:
    """Krige an indicator of 0 and 1 (Journel 1983): the mean of what its neighbours say, within 0 and 1.

    Where so few stations speak that no structure can be fitted, as in a small zone, it is their mean everywhere, and 0 where none does.

    Parameters
    ----------
    points : float array, shape (n, d), metres
    indicator : float array, shape (n,)

    Returns
    -------
    callable
        From points (m, d) to probabilities (m,).

    References
    ----------
    Journel, A. G. (1983). Nonparametric estimation of spatial distributions. Mathematical Geology 15, 445-468.
    """
    from texture.predict import Kriging
    from texture.structure import Covariance

    if not indicator.size:
        return lambda places: np.zeros(len(places))
    if indicator.min() == indicator.max() or indicator.size < FEWEST:
        return lambda places: np.full(len(places), float(indicator.mean()))
    kriging = Kriging(Covariance.fit(points, indicator)).fit(points, indicator)
    return lambda places: np.clip(kriging.predict(places)[0][:, 0], 0.0, 1.0)
