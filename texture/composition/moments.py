"""Means and variances of coordinates as they are given: checked once, and what is no covariance refused."""

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.errors import CompositionError

if TYPE_CHECKING:
    from texture.composition.logratio import LogRatio

__all__ = ["as_moments", "refuse_matrix"]


def as_moments(logratio: "LogRatio", mean: npt.ArrayLike, variance: npt.ArrayLike) -> tuple[Array, Array, bool]:
    """Checked (n, d) means, (n, d) variances or (n, d, d) covariances, and which of the two it is."""
    d = logratio.n_coordinates
    m = np.ascontiguousarray(mean, dtype=np.float64)
    v = np.ascontiguousarray(variance, dtype=np.float64)
    if m.ndim != 2 or m.shape[1] != d:
        raise CompositionError(f"mean has shape {m.shape}, expected (n, {d})")
    if v.shape not in (m.shape, (*m.shape, d)):
        raise CompositionError(f"variance has shape {v.shape}, expected {m.shape} or {(*m.shape, d)}")
    correlated = v.ndim == 3
    diagonal = np.einsum("nii->ni", v) if correlated else v
    if np.isinf(m).any() or np.isinf(v).any():
        row = int(np.argmax(np.isinf(m).any(axis=1) | np.isinf(v.reshape(len(v), -1)).any(axis=1)))
        raise CompositionError(f"row {row} (counted from 0): a mean or variance is infinite, expected finite or NaN")
    if (diagonal < 0).any():
        row = int(np.argmax((diagonal < 0).any(axis=1)))
        raise CompositionError(f"row {row} (counted from 0): variance {diagonal[row].min():g}, expected zero or more")
    if correlated and not (v[:, ~np.eye(d, dtype=bool)] != 0).any():
        return m, np.ascontiguousarray(diagonal), False
    return m, v, correlated


def refuse_matrix(status: npt.NDArray[np.bool_]) -> None:
    """Raise for the first row that a kernel marked as having no covariance."""
    if status.any():
        raise CompositionError(
            f"row {int(np.argmax(status))} (counted from 0): the matrix is not positive semi-definite, expected a "
            "covariance of the coordinates"
        )
