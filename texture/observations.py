"""From stations to arrays: points in the plane, log-ratio coordinates, and how far each is to be trusted."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition import class_moments, from_mud_and_sand
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
        As measured, NaN where unknown: for rows in words, and where only mud : sand is known.
    coordinates : float array, shape (n, d)
        Log-ratio coordinates, NaN where the row says nothing of them.
    noise : float array, shape (n, d)
        Variance of each coordinate beside the bed's own: rounding and small parts, words, unseen gravel; 0
        where the coordinate is NaN.
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

    Measured fractions become coordinates directly, words by the spread of their class, and rows that only know
    mud : sand by what measured rows say of gravel.

    Raises
    ------
    SampleError
        If fewer than five stations inform any coordinate.
    """
    table = stations.samples
    fractions = np.array(table[list(logratio.parts)], dtype=np.float64)  # a copy: some of it is blanked below
    words = (table["kind"] == "description").to_numpy()
    below_2mm = np.isfinite(fractions[:, :2]).all(axis=1) & np.isnan(fractions[:, 2]) & ~words
    whole = ~words & ~below_2mm
    coordinates = np.full((len(table), logratio.n_coordinates), np.nan)
    noise = coordinates.copy()
    step = 2.0 * table["resolution"].fillna(0.0).to_numpy(dtype=np.float64)  # the table holds half a step
    coordinates[whole], noise[whole] = logratio.forward_with_noise(fractions[whole], step[whole])
    if words.any():
        mean, covariance = class_moments(table.loc[words, "described_class"].tolist(), logratio)
        coordinates[words], noise[words] = mean, np.einsum("nii->ni", covariance)
    if below_2mm.any():
        mud, sand = fractions[below_2mm, 0], fractions[below_2mm, 1]
        known = _gravel_logit(fractions[whole], logratio.detection_limit)
        coordinates[below_2mm], noise[below_2mm] = from_mud_and_sand(logratio, mud / (mud + sand), known)
        fractions[below_2mm] = np.nan  # shares of what passed 2 mm are not shares of the whole: not to be scored
    informs = np.isfinite(coordinates).any(axis=1)
    if int(informs.sum()) < LEAST_STATIONS:
        raise SampleError(
            f"{int(informs.sum())} usable stations were left of {len(table)}, expected at least {LEAST_STATIONS}; "
            "see what was set aside with: texture intake"
        )
    names = sorted(table["survey"].unique())
    return Observations(
        points=plane.to_metres(table["longitude"].to_numpy(), table["latitude"].to_numpy()),
        fractions=fractions,
        coordinates=coordinates,
        noise=np.nan_to_num(noise),
        survey=table["survey"].map({name: i for i, name in enumerate(names)}).to_numpy(dtype=np.int64),
        measured=~words,
        rows=table.index.to_numpy(dtype=np.int64),
    ).take(np.flatnonzero(informs))


def _gravel_logit(fractions: Floats, limit: float) -> tuple[float, float] | None:
    """Mean and variance of logit gravel over measured rows; None where there are too few to say."""
    gravel = fractions[np.isfinite(fractions[:, 2]), 2]
    if gravel.size < LEAST_STATIONS:
        return None
    gravel = np.clip(gravel, 0.65 * limit, 1.0 - 0.65 * limit)
    logit = np.log(gravel / (1.0 - gravel))
    return float(logit.mean()), float(logit.var(ddof=1))
