"""Columns of values as fits see them: each with its own stations, scaled, its drift, noise and surveys checked."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError

__all__ = ["Column", "check_axes", "check_groups", "drift_columns", "make_column", "per_column", "residuals"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Column:
    """One column's own stations, its values scaled to unit variance."""

    points: Array
    values: Array
    noise_variance: Array
    drift: Array
    survey: NDArray[np.int64] | None
    scale: float  # standard deviation that the values were divided by
    extent_m: float
    spacing_m: float
    axes: tuple[int, ...] = ()  # coordinates with their own range

    @property
    def plane(self) -> Array:
        """The coordinates that share one range."""
        return np.ascontiguousarray(np.delete(self.points, list(self.axes), axis=1))

    @property
    def spreads(self) -> Array:
        """Standard deviations of the coordinates with their own range."""
        return np.asarray(self.points[:, list(self.axes)].std(axis=0))


def per_column(noise_variance: ArrayLike | None, shape: tuple[int, ...]) -> Array:
    """Noise variance of each value, shape (n, v); none is 0, a negative one is refused."""
    if noise_variance is None:
        return np.zeros(shape)
    noise = np.asarray(noise_variance, dtype=np.float64)
    if noise.ndim == 1:
        noise = noise[:, None]
    try:
        noise = np.broadcast_to(noise, shape)
    except ValueError as error:
        raise StructureError(f"noise_variance: found shape {noise.shape}, expected {shape} or ({shape[0]},)") from error
    if (noise < 0).any():
        row = int(np.argmax((noise < 0).any(axis=1)))
        raise StructureError(f"noise_variance: row {row} is negative; a variance is 0 or more")
    return noise


def drift_columns(drift: ArrayLike | None, n: int) -> Array:
    """The constant and the standardised drift columns, shape (n, 1 + p)."""
    if drift is None:
        return np.ones((n, 1))
    columns = np.asarray(drift, dtype=np.float64).reshape(n, -1)
    if not np.isfinite(columns).all():
        row = int(np.argmax(~np.isfinite(columns).all(axis=1)))
        raise StructureError(f"drift: row {row} is not a finite number; fill it or leave the station out")
    # Standardised, so that the drift's information matrix is well conditioned whatever the units.
    spread = columns.std(axis=0)
    return np.column_stack([np.ones(n), (columns - columns.mean(axis=0)) / np.where(spread > 0, spread, 1.0)])


def check_axes(axes: Sequence[int], points: Array) -> tuple[int, ...]:
    """Coordinates with their own range: some of those there are, none of them constant."""
    own = tuple(int(a) for a in axes)
    d = points.shape[1]
    if len(set(own)) != len(own) or any(not 0 <= a < d for a in own) or (own and len(own) == d):
        raise StructureError(f"own_range_axes: found {own}, expected some, not all, of the coordinates 0 to {d - 1}")
    for a in own:
        if np.ptp(points[:, a]) == 0.0:
            raise StructureError(f"own_range_axes: coordinate {a} is the same at all stations; leave it out")
    return own


def check_groups(groups: Sequence[Sequence[int]] | None, count: int) -> list[list[int]]:
    """Lists of columns that share range and family, each column in one; by default each alone."""
    if groups is None:
        return [[v] for v in range(count)]
    sets = [list(g) for g in groups]
    if sorted(v for g in sets for v in g) != list(range(count)):
        raise StructureError(f"groups: found {sets}, expected each of the columns 0 to {count - 1} exactly once")
    return sets


def make_column(
    points: Array, values: Array, noise: Array, drift: Array, labels: Any, number: int, axes: tuple[int, ...]
) -> Column:
    """Column `number` at the stations that know it; raises StructureError where they are fewer than three."""
    from scipy.spatial import cKDTree

    known = np.flatnonzero(np.isfinite(values) & np.isfinite(noise))
    if len(known) < 3:
        raise StructureError(f"column {number}: found {len(known)} stations with a value, expected at least 3 to fit")
    own, z = points[known], values[known]
    survey = None if labels is None else np.unique(labels[known], return_inverse=True)[1].astype(np.int64)
    if survey is not None and survey.max() == 0:
        survey = None  # one survey has no offset against itself
    plane = np.delete(own, list(axes), axis=1)
    extent = float(np.linalg.norm(np.ptp(plane, axis=0)))
    near = cKDTree(plane).query(plane, k=2)[0][:, 1]
    spacing = float(np.median(near[near > 0])) if (near > 0).any() else 0.0
    scale = float(z.std())
    # Equal values leave rounding noise in their standard deviation.
    if scale <= 1e-12 * max(1.0, float(np.abs(z).max())) or extent == 0.0:
        scale = 0.0
    unit = scale or 1.0
    return Column(
        own, (z - z.mean()) / unit, noise[known] / unit**2, drift[known], survey, scale, extent, spacing, axes
    )


def residuals(column: Column) -> Array:
    """Values less their least squares drift."""
    coefficients = np.linalg.lstsq(column.drift, column.values, rcond=None)[0]
    residual: Array = column.values - column.drift @ coefficients
    return residual
