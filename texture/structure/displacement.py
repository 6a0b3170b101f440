"""What a badly known position is worth: the variance between the bed at a stated place and where the sample came from."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.structure.covariance import Covariance, CovarianceSet

__all__ = ["displacement_variance", "place_noise"]

Array = NDArray[np.float64]
NODES = 6  # Gauss-Legendre in each half, so that the cusp of a model at 0 lies in a corner: means to 1e-3
LEAST = 0.01
"""Share of the sill below which a displacement counts for nothing: less than what samples side by side differ by."""
ACCURACIES_M = 10.0 ** (np.arange(0, 97) / 16.0)  # 1 m to 1000 km; between them, to 5e-4 of the sill


def displacement_variance(covariance: Covariance, accuracy_m: ArrayLike) -> Array:
    """Variance of the difference between the bed at two points a random displacement apart.

    The displacement is uniform in a square of `accuracy_m` either way, which is what rounded coordinates leave open. Twice the
    structures' mean semivariance over it: none where a position is exact, twice the sill where it may be anywhere. The
    small-scale variation is left out, since no station tells it of any place but its own. As a noise of the station it takes the
    weight from places that are badly known (Gabrosek & Cressie 2002; Cressie & Kornak 2003, from memory: there the covariance
    itself is averaged over the displacement, which this stands for).

    Parameters
    ----------
    covariance : Covariance
    accuracy_m : array-like, shape (n,)
        Half width of what is possible in each coordinate; 0 or NaN is exact.

    Returns
    -------
    variance : float array, shape (n,)

    Examples
    --------
    >>> from texture.structure import Structure
    >>> c = Covariance([Structure("exponential", 1.0, 3000.0)], small_scale=0.5)
    >>> displacement_variance(c, [0.0, 10.0, 926.0, 1e9]).round(3)
    array([0.   , 0.015, 0.979, 2.   ])
    """
    accuracy = np.nan_to_num(np.asarray(accuracy_m, dtype=np.float64))
    sill = sum(s.sill for s in covariance.structures)
    if sill == 0.0 or not (accuracy > 0.0).any():
        return np.zeros(accuracy.shape)
    x, w = np.polynomial.legendre.leggauss(NODES)
    x, w = np.concatenate([x - 1.0, x + 1.0]) / 2.0, np.concatenate([w, w]) / 4.0
    square = np.column_stack([np.repeat(x, x.size), np.tile(x, x.size)])
    weight = np.outer(w, w).ravel()
    dimensions = max(2, len(covariance.axis_scales or ()))
    away = np.zeros((weight.size * len(ACCURACIES_M), dimensions))  # other coordinates than x and y stay
    away[:, :2] = (ACCURACIES_M[:, None, None] * square).reshape(-1, 2)
    distance = np.linalg.norm(covariance.metric(away), axis=1)
    semivariance = covariance.variogram(distance) - covariance.small_scale - covariance.noise
    twice = 2.0 * (semivariance.reshape(len(ACCURACIES_M), -1) @ weight)
    found = np.interp(np.log(np.maximum(accuracy, ACCURACIES_M[0])), np.log(ACCURACIES_M), twice)
    return np.asarray(np.where(accuracy >= ACCURACIES_M[0], found, twice[0] * accuracy / ACCURACIES_M[0]))


def place_noise(structure: CovarianceSet, accuracy_m: Array, values: Array) -> Array:
    """Noise variance of every column that stations have from their badly known places, shape (n, k).

    0 where a value is NaN, and where it would be below a hundredth of the structures' sill.
    """
    columns = []
    for covariance, value in zip(structure, values.T, strict=True):
        variance = displacement_variance(covariance, accuracy_m)
        least = LEAST * sum(s.sill for s in covariance.structures)
        columns.append(np.where(np.isnan(value) | (variance < least), 0.0, variance))
    return np.column_stack(columns)
