"""Stations that no neighbour believes: flagged by leave-one-out, never dropped."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from texture.mapping import Mapper
    from texture.observations import Observations
    from texture.stations import Stations

__all__ = ["flag_stations"]


def flag_stations(stations: Stations, mapper: Mapper, observations: Observations) -> Stations:
    """Give every station its standardised leave-one-out error, and list those beyond four standard deviations.

    Methods without a variance cannot tell what is far out, and a neighbourhood for each point has no quick way to leave
    one out: their stations stay as they are.
    """
    if not mapper.solves or mapper.predictor.neighbourhood == "nearest":
        return stations
    from texture.predict.leave_out import leave_out

    z = np.full((observations.count, len(mapper.column_names)), np.nan)
    everywhere = [(np.arange(observations.count), mapper.predictor)]
    # A zone's own stations come last: each is judged where it is heard and nowhere else, as the map hears it.
    for index, kriging in everywhere if mapper.by_zone is None else mapper.by_zone.fitted.values():
        mean, variance = leave_out(kriging)
        with np.errstate(invalid="ignore"):  # a coordinate that a station says nothing of
            z[index] = (kriging.stations.values - mean) / np.sqrt(variance)
    return stations.with_outliers(z, observations.rows)
