"""From stations to arrays: points in the plane, log-ratio coordinates, and how far each is to be trusted."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import SampleError

if TYPE_CHECKING:
    from texture.composition import LogRatio
    from texture.stations import Stations
    from texture.structure.plane import Plane

__all__ = ["Observations", "observe"]

Floats = NDArray[np.float64]
LEAST_STATIONS = 5  # fewer cannot show any spatial structure, nor be held out and still fit


@dataclass(frozen=True, eq=False)
class Observations:
    """What the stations say, as arrays with one row per station.

    Attributes
    ----------
    points : float array, shape (n, 2)
        Metres in the working plane.
    fractions : float array, shape (n, parts)
        As read, NaN where unknown.
    coordinates : float array, shape (n, d)
        Log-ratio coordinates, NaN where the row says nothing of them.
    noise : float array, shape (n, d)
        Variance that rounding and small parts give each coordinate; 0 where the coordinate is NaN.
    survey : int array, shape (n,)
        Number of the survey of each station.
    measured : bool array, shape (n,)
        True where fractions were measured rather than described in words; only these are scored.
    rows : int array, shape (n,)
        Row of the stations table.
    """

    points: Floats
    fractions: Floats
    coordinates: Floats
    noise: Floats
    survey: NDArray[np.int64]
    measured: NDArray[np.bool_]
    rows: NDArray[np.int64]

    @property
    def count(self) -> int:
        """Number of stations."""
        return int(self.points.shape[0])

    def take(self, index: NDArray[np.int64]) -> Observations:
        """Return the observations of some stations."""
        return replace(self, **{name: getattr(self, name)[index] for name in self.__dataclass_fields__})


def observe(stations: Stations, logratio: LogRatio, plane: Plane) -> Observations:
    """Turn stations into arrays; rows that are evidence of hard ground are not part of them.

    Raises
    ------
    SampleError
        If fewer than five stations inform any coordinate.
    """
    table = stations.table
    parts = table[list(logratio.parts)].to_numpy(dtype=np.float64)
    rows = np.flatnonzero(np.isfinite(parts).any(axis=1) & (table["kind"] != "hard_ground").to_numpy())
    chosen = table.iloc[rows]
    step = 2.0 * chosen["resolution"].fillna(0.0).to_numpy(dtype=np.float64)  # the table holds half a step
    coordinates, noise = logratio.forward_with_noise(parts[rows], step)
    informs = np.isfinite(coordinates).any(axis=1)
    if int(informs.sum()) < LEAST_STATIONS:
        raise SampleError(
            f"{int(informs.sum())} usable stations were left of {len(table)}, expected at least {LEAST_STATIONS}; "
            "see what was set aside with: texture intake"
        )
    names = sorted(chosen["survey"].unique())
    return Observations(
        points=plane.to_metres(chosen["longitude"].to_numpy(), chosen["latitude"].to_numpy()),
        fractions=parts[rows],
        coordinates=coordinates,
        noise=np.nan_to_num(noise),
        survey=chosen["survey"].map({name: i for i, name in enumerate(names)}).to_numpy(dtype=np.int64),
        measured=(~chosen["kind"].isin(["description", "median_only"])).to_numpy(),
        rows=rows,
    ).take(np.flatnonzero(informs))
