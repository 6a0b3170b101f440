"""Where the bed is rock or cannot erode: a probability from stations that found hard ground, and polygons as they are given."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from texture.result import Validated

__all__ = ["hard_ground_probability", "indicator_map"]

Floats = NDArray[np.float64]
CELLS_AT_ONCE = 100_000
FEWEST = 5  # stations that show any structure, as for the composition


def hard_ground_probability(found: Validated) -> Floats | None:
    """Probability of hard ground in each cell, shape (n,); None where neither a station nor a polygon tells of any.

    Stations that found hard ground count as 1 and those with a measured sample as 0; their indicator is kriged, in each zone
    with a hard edge from the stations that are heard there. Inside the polygons of `bed.hard_ground` it is 1.
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
        zones = found.mapper.zones
        for number in range(1 if zones is None else len(zones.settings) + 1):
            heard = np.ones(rows.size, dtype=bool) if zones is None else zones.heard(number, rows)
            cells = np.flatnonzero(target.active if zones is None else target.active & (zones.cells.zone == number))
            if not cells.size or not hard[heard].any():
                continue
            predict = indicator_map(here[heard], hard[heard])
            for start in range(0, cells.size, CELLS_AT_ONCE):
                some = cells[start : start + CELLS_AT_ONCE]
                probability[some] = predict(found.plane.to_metres(target.longitude[some], target.latitude[some]))
    if recipe.bed.hard_ground is not None:
        area = polygon_area(recipe.bed.hard_ground)
        probability[inside(area, target.longitude, target.latitude) & target.active] = 1.0
    return probability


def indicator_map(points: Floats, indicator: Floats) -> Callable[[Floats], Floats]:
    """Krige an indicator of 0 and 1 (Journel 1983): the mean of what its neighbours say, within 0 and 1.

    Where so few stations speak that no structure can be fitted, as in a small zone, it is their mean everywhere.

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

    if indicator.min() == indicator.max() or indicator.size < FEWEST:
        return lambda places: np.full(len(places), float(indicator.mean()))
    kriging = Kriging(Covariance.fit(points, indicator)).fit(points, indicator)
    return lambda places: np.clip(kriging.predict(places)[0][:, 0], 0.0, 1.0)
