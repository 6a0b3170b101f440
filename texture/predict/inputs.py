"""What every method of prediction asks of its stations, checked once."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.structure.covariance import check_points

__all__ = ["Stations", "check_columns", "check_drift", "check_stations", "column_trees"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Stations:
    """Checked stations.

    Parameters
    ----------
    points : float array, shape (n, d)
    values : float array, shape (n, v), NaN where unknown
    noise_variance : float array, shape (n, v)
    survey : int array, shape (n,), or None
        Surveys numbered from 0.
    drift : float array, shape (n, p), or None
    """

    points: Array
    values: Array
    noise_variance: Array
    survey: NDArray[np.int64] | None
    drift: Array | None

    @property
    def count(self) -> int:
        """Number of stations."""
        return len(self.points)

    @property
    def columns(self) -> int:
        """Number of columns of values."""
        return int(self.values.shape[1])


def check_stations(
    points: ArrayLike,
    values: ArrayLike,
    noise_variance: ArrayLike | None = None,
    survey: ArrayLike | None = None,
    drift: ArrayLike | None = None,
) -> Stations:
    """Shapes, finiteness and signs of what `fit` was given; raises `StructureError`."""
    places = check_points(points)
    n = len(places)
    array = np.array(values, dtype=np.float64)
    array = array[:, None] if array.ndim == 1 else array
    if array.ndim != 2 or array.shape[0] != n:
        raise StructureError(f"values: found shape {array.shape}, expected ({n}, v) as there are points")
    if np.isinf(array).any():
        row = int(np.argmax(np.isinf(array).any(axis=1)))
        raise StructureError(f"values: row {row} is infinite; give NaN where a value is unknown")
    empty = ~np.isfinite(array).any(axis=0)
    if empty.any():
        raise StructureError(f"values: column {int(np.argmax(empty))} has no station with a value, expected at least 1")
    noise = np.zeros(array.shape)
    if noise_variance is not None:
        given = np.asarray(noise_variance, dtype=np.float64)
        given = given[:, None] if given.ndim == 1 else given
        if given.shape not in (array.shape, (n, 1)):
            raise StructureError(f"noise_variance: found shape {given.shape}, expected {array.shape} or ({n},)")
        noise = np.where(np.isfinite(array), given, 0.0)
        bad = ~(np.isfinite(noise) & (noise >= 0.0)).all(axis=1)
        if bad.any():
            raise StructureError(f"noise_variance: row {int(np.argmax(bad))} is not a number of at least 0")
    labels: Any = None
    if survey is not None:
        given_labels = np.asarray(survey)
        if given_labels.shape != (n,):
            raise StructureError(
                f"survey: found shape {given_labels.shape}, expected ({n},), one label for each station"
            )
        labels = np.unique(given_labels, return_inverse=True)[1].astype(np.int64)
    columns = None
    if drift is not None:
        columns = np.asarray(drift, dtype=np.float64)
        columns = columns[:, None] if columns.ndim == 1 else columns
        if columns.ndim != 2 or len(columns) != n:
            raise StructureError(f"drift: found shape {columns.shape}, expected ({n}, p) as there are stations")
        bad = ~np.isfinite(columns).all(axis=1)
        if bad.any():
            raise StructureError(f"drift: row {int(np.argmax(bad))} is not finite; fill it or leave the station out")
    return Stations(places, array, noise, labels, columns)


def check_columns(columns: ArrayLike | None, stations: Stations) -> Array:
    """Further value columns, shape (n, v, c), finite where the station has a value; raises `StructureError`."""
    n, v = stations.values.shape
    if columns is None:
        return np.empty((n, v, 0))
    array = np.asarray(columns, dtype=np.float64)
    if array.ndim != 3 or array.shape[:2] != (n, v):
        raise StructureError(f"columns: found shape {array.shape}, expected ({n}, {v}, c), c for each column of values")
    bad = (np.isfinite(stations.values)[:, :, None] & ~np.isfinite(array)).any(axis=(1, 2))
    if bad.any():
        raise StructureError(f"columns: row {int(np.argmax(bad))} is not finite where the station has a value")
    return array


def check_drift(drift: ArrayLike | None, count: int, stations: Stations) -> Array | None:
    """Drift columns at the points, shaped as at the stations; raises `StructureError`."""
    if stations.drift is None:
        if drift is not None:
            raise StructureError("drift: given for the points, but the stations had none; give it to fit as well")
        return None
    wanted = stations.drift.shape[1]
    if drift is None:
        raise StructureError(f"drift: the stations had {wanted} columns; give the same columns at the points")
    columns = np.asarray(drift, dtype=np.float64)
    columns = columns[:, None] if columns.ndim == 1 else columns
    if columns.shape != (count, wanted):
        raise StructureError(f"drift: found shape {columns.shape}, expected ({count}, {wanted})")
    bad = ~np.isfinite(columns).all(axis=1)
    if bad.any():
        raise StructureError(f"drift: row {int(np.argmax(bad))} of the points is not finite; fill it first")
    return columns


def column_trees(stations: Stations) -> list[tuple[Any, Array]]:
    """For each column of values a k-d tree of the stations that know it, and their values."""
    from scipy.spatial import cKDTree

    trees = []
    for column in stations.values.T:
        known = np.isfinite(column)
        trees.append((cKDTree(stations.points[known]), column[known]))
    return trees
