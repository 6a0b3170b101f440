"""Held-out predictions without refitting or re-solving: leave one out, leave groups out.

With B the inverse of the bordered kriging matrix, the errors of the samples of a left-out group g are
``inv(B_gg) (B z)_g`` and ``inv(B_gg)`` is their covariance (Dubrule 1983 for one sample; Ginsbourger & Schärer 2024 for
groups). One inverse serves all groups.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.predict.kriging import Kriging
from texture.predict.system import System

__all__ = ["leave_out"]

Array = NDArray[np.float64]


def leave_out(kriging: Kriging, groups: ArrayLike | None = None) -> tuple[Array, Array]:
    """Predict each sample from all others, or from all outside its group.

    Parameters
    ----------
    kriging : Kriging
        Fitted. With ``neighbours=None`` the answer is that of all stations. With tiles each station is left out of
        the neighbourhood of its own tile, and groups are refused: a whole group is seldom inside one.
    groups : int array, shape (n,), optional
        Samples with equal numbers are left out together; each alone by default.

    Returns
    -------
    mean, variance : float arrays, shape (n, v)
        Of the left-out *sample*: noise is in the variance, and so is its survey's offset as far as the rest of that
        survey does not tell it. NaN where a column is unknown, and where the rest cannot support the drift.

    Raises
    ------
    StructureError
        Groups with tiles; the "nearest" neighbourhood, whose stations change when one is left out.
    """
    from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]  # ships no annotations

    stations = kriging.stations
    mean = np.full(stations.values.shape, np.nan)
    variance = np.full(stations.values.shape, np.nan)
    labels = np.arange(stations.count) if groups is None else np.asarray(groups)
    if labels.shape != (stations.count,):
        raise StructureError(f"groups: found shape {labels.shape}, expected ({stations.count},)")
    if kriging.neighbourhood == "nearest":
        raise StructureError(
            "leave_out: works with all stations or tiles; predict folds with the nearest neighbourhood"
        )
    for system in kriging.systems:
        if kriging.neighbourhood == "all":
            _leave_groups_out(system, labels, mean, variance)
        elif groups is not None:
            raise StructureError("leave_out: groups need neighbours=None (all stations)")
        else:
            with threadpool_limits(limits=1, user_api="blas"):  # a hundred rows: threads cost ten times what they save
                _leave_out_of_tiles(system, mean, variance)
    return mean, variance


def _bordered_inverse(system: System, k: int, rows: Any) -> tuple[Array, Array, Array]:
    """Upper left block of the inverse of the bordered matrix for some stations, that block times the values, inv(K).

    By way of the covariance's own inverse: B = inv(K) - inv(K) F inv(F' inv(K) F) F' inv(K).
    """
    from scipy.linalg import cho_factor, cho_solve

    covariance = system.station_covariance(k, rows)
    # The same relative floor as the kernel's: a redundant sample must not spoil the inverse of the others.
    covariance[np.diag_indices(len(covariance))] *= 1.0 + 1e-12
    inverse = cho_solve(cho_factor(covariance, lower=True), np.eye(len(covariance)))
    drift = system.models.columns[k][rows][:, : system.drifts]
    weighted = inverse @ drift
    bordered = inverse - weighted @ np.linalg.pinv(drift.T @ weighted, hermitian=True) @ weighted.T
    return bordered, bordered @ system.models.columns[k][rows, system.drifts], inverse


def _restore(system: System, k: int, row: Any, departure: Any) -> Any:
    """From a departure to the value: the centre, global drift and the survey's offset at the station."""
    wide = system.wide[row] @ system.coefficients[k, 0]
    return departure + system.centre[k, 0] + wide + system.offsets[k, 0][system.models.survey[row]]


def _leave_groups_out(system: System, labels: NDArray[np.int64], mean: Array, variance: Array) -> None:
    from scipy.linalg import eigh

    own = labels[system.rows]
    members = [np.flatnonzero(own == g) for g in np.unique(own)]
    for k, column in enumerate(system.columns):
        bordered, weighted, inverse = _bordered_inverse(system, k, np.arange(len(system.rows)))
        value = system.models.columns[k, :, system.drifts]
        for group in members:
            block = bordered[np.ix_(group, group)]
            # The drift took away from inv(K) all that the group tells: without it the drift (or the mean) is not known.
            if eigh(block, inverse[np.ix_(group, group)], eigvals_only=True)[0] < 1e-10:
                continue
            spread = np.linalg.inv(block)
            error = spread @ weighted[group]
            mean[system.rows[group], column] = _restore(system, k, group, value[group] - error)
            variance[system.rows[group], column] = np.diag(spread)


def _leave_out_of_tiles(system: System, mean: Array, variance: Array) -> None:
    tiles, n = system.tiles, len(system.rows)
    begin, tile, weight = tiles.serving(system.models.points)
    station = np.repeat(np.arange(n), np.diff(begin))
    by_tile = np.argsort(tile, kind="stable")
    departure, spread = np.zeros((n, len(system.columns))), np.zeros((n, len(system.columns)))
    for pairs in np.split(by_tile, np.flatnonzero(np.diff(tile[by_tile])) + 1):
        rows = tiles.stations(int(tile[pairs[0]]))
        place = np.empty(n, dtype=np.int64)
        place[rows] = np.arange(len(rows))
        here = place[station[pairs]]
        for k in range(len(system.columns)):
            bordered, weighted, inverse = _bordered_inverse(system, k, rows)
            own = np.diag(bordered)[here]
            told = own > 1e-10 * np.diag(inverse)[here]
            own = 1.0 / np.where(told, own, np.nan)
            value = system.models.columns[k, station[pairs], system.drifts]
            departure[station[pairs], k] += weight[pairs] * (value - own * weighted[here])
            spread[station[pairs], k] += weight[pairs] * own
    for k, column in enumerate(system.columns):
        mean[system.rows, column] = _restore(system, k, np.arange(n), departure[:, k])
        variance[system.rows, column] = spread[:, k]
