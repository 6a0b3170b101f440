"""What is common to all stations: drift coefficients and survey offsets, estimated once from everything."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import StructureError
from texture.structure.covariance import Covariance

if TYPE_CHECKING:
    from texture.structure.vecchia import Arrangement

__all__ = ["MOST_SURVEYS", "Effects", "arrange_stations", "estimate_effects", "station_covariance"]

Array = NDArray[np.float64]

# Stations up to which the estimate is dense (to the last digit); beyond, Vecchia's product whitens the columns.
MOST_DENSE = 1500

# Each survey is one more column to whiten; with more surveys than this each is too small to stand out anyway, and
# their offsets are left to the neighbourhoods.
MOST_SURVEYS = 300


class Effects:
    """Estimated effects of the value columns of one covariance.

    Parameters
    ----------
    coefficients : float array, shape (c, p)
        Of the drift columns; the constant is fitted with them and left to the local mean.
    covariance : float array, shape (p, p)
    offsets : float array, shape (c, surveys)
        Best linear unbiased predictions of the survey offsets.
    offset_variance : float array, shape (surveys,)
        What is left of their variance.
    """

    def __init__(self, coefficients: Array, covariance: Array, offsets: Array, offset_variance: Array) -> None:
        self.coefficients, self.covariance = coefficients, covariance
        self.offsets, self.offset_variance = offsets, offset_variance


def arrange_stations(points: Array) -> Arrangement | None:
    """Order and predecessors of the stations; None for so few that the estimate is dense."""
    from texture.structure.vecchia import arrange

    return arrange(points, all_stations=True) if len(points) > MOST_DENSE else None


def estimate_effects(
    points: Array,
    values: Array,
    noise: Array,
    survey: NDArray[np.int64],
    c: Covariance,
    drift: Array,
    arranged: Arrangement | None,
) -> Effects:
    """Generalised least squares drift and best linear unbiased survey offsets (Henderson's mixed-model equations).

    Parameters
    ----------
    points : float array, shape (n, d), in the covariance's metric
    values : float array, shape (n, c)
        All of them have the same stations, covariance and noise.
    noise : float array, shape (n,)
    survey : int array, shape (n,)
    c : Covariance
    drift : float array, shape (n, p)
        Without the constant, standardised; p may be 0.
    arranged : Arrangement, optional
        What `arrange_stations` made of the points: covariances of the same stations share it.
    """
    from texture.structure.vecchia import Vecchia, mixed_model

    n, surveys = len(points), int(survey.max()) + 1
    design = np.column_stack([np.ones(n), drift])
    if np.linalg.matrix_rank(design) < design.shape[1]:
        raise StructureError("drift: the columns are linearly dependent (or one is constant); leave out one")
    own = c.survey > 0.0 and 1 < surveys <= MOST_SURVEYS
    indicator = np.eye(surveys)[survey] if own else np.empty((n, 0))
    columns = np.column_stack([design, indicator, values])
    if arranged is None:
        gram = _dense_products(points, noise, c, columns, columns.shape[1] - values.shape[1])
    else:
        _, gram = Vecchia(points, columns, arranged).whiten(c.packed, noise + c.small_scale, _threads())
    coefficients, covariance, _ = mixed_model(gram, design.shape[1], c.survey, values.shape[1])
    p = design.shape[1]
    # A survey that cannot be told from the others keeps its prior: no offset, all of the variance.
    offsets = coefficients[p:].T if own else np.zeros((values.shape[1], surveys))
    left = np.diag(covariance)[p:] if own else np.full(surveys, c.survey)
    return Effects(coefficients[1:p].T, covariance[1:p, 1:p], offsets, left)


def station_covariance(
    c: Covariance, metric_points: Array, noise: Array, survey_variance: Array, survey: NDArray[np.int64]
) -> Array:
    """Covariance of the samples: of the bed, noise and survey offsets (one variance for each survey)."""
    from texture.structure.compiled import covariance_matrix, distance_matrix

    k: Array = covariance_matrix(c.packed, c.small_scale, distance_matrix(metric_points, metric_points))
    k += np.diag(noise)
    if survey_variance.any():
        k += survey_variance[survey] * (survey[:, None] == survey[None, :])
    return k


def _threads() -> int:
    from numba import get_num_threads

    return int(get_num_threads())


def _dense_products(points: Array, noise: Array, c: Covariance, columns: Array, effects: int) -> Any:
    from scipy.linalg import cholesky, solve_triangular

    k = station_covariance(c, points, noise, np.zeros(1), np.zeros(len(points), dtype=np.int64))
    # Two exact samples of one place by two surveys would outweigh all others by the inverse of this floor, and the
    # products of columns by its size in rounding.
    k[np.diag_indices(len(k))] *= 1.0 + 1e-9
    lower = cholesky(k, lower=True)
    white = solve_triangular(lower, columns[:, :effects], lower=True)
    gram = np.zeros((columns.shape[1], columns.shape[1]))
    gram[:effects, :effects] = white.T @ white
    # One value column at a time: the library's result for many at once hangs on how many they are.
    for j in range(effects, columns.shape[1]):
        gram[:effects, j] = white.T @ solve_triangular(lower, columns[:, j], lower=True)
    return gram
