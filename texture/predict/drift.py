"""One generalised least squares fit of drift coefficients to all stations."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from texture.errors import StructureError
from texture.structure.covariance import Covariance

__all__ = ["global_drift"]

Array = NDArray[np.float64]


def global_drift(
    points: Array,
    values: Array,
    noise: Array,
    survey: NDArray[np.int64],
    covariances: Sequence[Covariance],
    drift: Array,
) -> tuple[Array, Array]:
    """Coefficients (v, p) of the drift columns and their covariance (v, p, p), one set for each column of values.

    A constant is fitted with them and left to the local mean.
    """
    from texture.predict.system import MOST_DENSE, station_covariance

    if len(points) > MOST_DENSE:
        raise StructureError(f"global drift: {len(points)} stations")
    design = np.column_stack([np.ones(len(points)), drift])
    if np.linalg.matrix_rank(design) < design.shape[1]:
        raise StructureError("drift: the columns are linearly dependent (or one is constant); leave out one")
    coefficients, spread = [], []
    for k, c in enumerate(covariances):
        factor = np.linalg.cholesky(
            station_covariance(c, points, noise[k], survey) + 1e-12 * c.sill * np.eye(len(points))
        )
        white = np.linalg.solve(factor, np.column_stack([design, values[:, k]]))
        inverse = np.linalg.inv(white[:, :-1].T @ white[:, :-1])
        coefficients.append((inverse @ (white[:, :-1].T @ white[:, -1]))[1:])
        spread.append(inverse[1:, 1:])
    return np.array(coefficients), np.array(spread)
