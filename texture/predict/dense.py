"""One place, one column and the stations that serve it, solved as it stands in the books, by LAPACK.

Shares no code with the kernel beyond the covariance function; the second opinion and the check of neighbourhoods use it.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from texture.predict.system import System

__all__ = ["Problem"]

Array = NDArray[np.float64]

# Differences up to this part of the sill (variance) or of its root (mean) are rounding in ordinary cases.
ORDINARY = 1e-6


class Problem:
    """One place, one column, the stations that served it."""

    def __init__(self, system: System, k: int, rows: Any, place: Array, local: Array, wide: Array) -> None:
        self.covariance = system.covariances[k]
        self.points, self.place = system.models.points[rows], place
        self.noise = system.models.noise[k][rows]
        block = system.models.columns[k][rows]
        self.drift, self.values = block[:, : system.drifts], block[:, system.drifts]
        self.wide_columns = block[:, system.drifts + system.value_columns :]
        self.local, self.wide = local, wide
        self.wide_covariance = system.models.global_covariance[k]
        self.matrix = system.station_covariance(k, rows)

    def gap(self, ours: tuple[float, float], theirs: tuple[float, float]) -> tuple[float, float]:
        """Differences of means over the root of the sill, and of variances over the sill."""
        sill = max(self.covariance.sill, 1e-300)
        return abs(ours[0] - theirs[0]) / np.sqrt(sill), abs(ours[1] - theirs[1]) / sill

    def tolerance(self) -> float:
        """Difference that rounding explains."""
        # Each digit of the condition number is a digit lost; 100 is the growth that a few hundred terms add.
        return max(ORDINARY, 100.0 * np.finfo(np.float64).eps * float(np.linalg.cond(self.matrix)))

    def dense(self) -> tuple[float, float]:
        """Mean and variance by Cholesky and elimination of the border, by LU where the matrix is nearly singular."""
        from scipy.linalg import cho_factor, cho_solve, lu_factor, lu_solve

        from texture.structure.compiled import covariance_matrix, distance_matrix

        c = self.covariance
        k0 = covariance_matrix(c.packed, c.small_scale, distance_matrix(self.points, self.place[None]))[:, 0]
        right = np.column_stack([k0, self.drift])
        try:
            solved = cho_solve(cho_factor(self.matrix, lower=True), right)
        except np.linalg.LinAlgError:
            solved = lu_solve(lu_factor(self.matrix), right)
        weight = solved[:, 0]
        border = self.local - self.drift.T @ weight
        if self.drift.shape[1]:
            multiplier = np.linalg.lstsq(self.drift.T @ solved[:, 1:], border, rcond=None)[0]
            weight = weight + solved[:, 1:] @ multiplier
            variance = c.sill - weight @ k0 + self.local @ multiplier
        else:
            variance = c.sill - weight @ k0
        if self.wide.size:
            rest = self.wide - self.wide_columns.T @ weight
            variance += rest @ self.wide_covariance @ rest
        return float(weight @ self.values), float(variance)
