"""Compositions as vectors: closure, perturbation, powering, distance, centre and variation (Aitchison 1986).

Everything works along the last axis on rows of positive parts; a row with a NaN gives a NaN row. Zeros have
no logarithm: replace them first (`texture.composition.zeros`).

References
----------
Aitchison, J. (1986). The Statistical Analysis of Compositional Data. Chapman and Hall.
"""

import numpy as np
import numpy.typing as npt

from texture.errors import CompositionError

__all__ = [
    "Array",
    "centre",
    "check_parts",
    "close",
    "clr",
    "clr_inverse",
    "difference",
    "distance",
    "inner",
    "norm",
    "perturb",
    "power",
    "total_variance",
    "variation_matrix",
]

Array = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]


def check_parts(parts: npt.ArrayLike, *, n_parts: int | None = None, positive: bool = False) -> Array:
    """Return `parts` as float64, or say which row makes no sense.

    Parameters
    ----------
    parts : array-like, shape (..., D)
        Amounts of each part in any one unit; NaN means unknown and is let through.
    n_parts : int, optional
        The number of columns expected.
    positive : bool, default False
        Refuse zeros too, for what needs a logarithm.

    Raises
    ------
    CompositionError
        For a wrong number of columns, a negative or infinite part, or (`positive`) a zero.
    """
    array = np.asarray(parts, dtype=np.float64)
    if array.ndim == 0 or (n_parts is not None and array.shape[-1] != n_parts):
        wanted = "at least one axis" if n_parts is None else f"{n_parts} columns, one for each part"
        raise CompositionError(f"parts have shape {array.shape}, expected {wanted}")
    _refuse(array, np.isinf(array), "infinite", "finite amounts; use NaN for what was not measured")
    _refuse(array, array < 0, "negative", "amounts of zero or more; use NaN for what was not measured")
    if positive:
        _refuse(array, array == 0, "zero", "positive parts; replace zeros first")
    return array


def close(parts: npt.ArrayLike, total: float = 1.0) -> Array:
    """Rows divided by their sum, so that they sum to `total`.

    The rounding left over is given to the largest part, so that the sum is `total` to the last bit or two.

    Parameters
    ----------
    parts : array-like, shape (..., D)
        Zero or positive amounts in any one unit. A row with a NaN gives a NaN row.
    total : float, default 1.0
        What each row sums to afterwards.

    Raises
    ------
    CompositionError
        For negative or infinite parts, or a row of zeros only.

    Examples
    --------
    >>> close([2, 2, 6])
    array([0.2, 0.2, 0.6])
    """
    array = check_parts(parts)
    # The largest part first to 1: rows near the ends of the float range neither overflow nor vanish.
    largest = array.max(axis=-1, keepdims=True)
    _refuse(largest, largest == 0, "a sum of zero", "at least one part above zero")
    scaled = array / largest
    closed = scaled / scaled.sum(axis=-1, keepdims=True)
    residual = 1.0 - closed.sum(axis=-1, keepdims=True)
    first_largest = np.argmax(closed, axis=-1)[..., None]
    np.put_along_axis(closed, first_largest, np.take_along_axis(closed, first_largest, axis=-1) + residual, axis=-1)
    return np.asarray(closed * total if total != 1.0 else closed)


def perturb(x: npt.ArrayLike, y: npt.ArrayLike) -> Array:
    """Perturbation, the addition of compositions: the closed product of parts (Aitchison 1986)."""
    return close(check_parts(x) * check_parts(y))


def power(x: npt.ArrayLike, exponent: npt.ArrayLike) -> Array:
    """Powering, the scaling of compositions: closed x ** exponent; `exponent` is one number or one per row."""
    exponents = np.asarray(exponent, dtype=np.float64)
    return clr_inverse(clr(x) * (exponents[..., None] if exponents.ndim else exponents))


def difference(x: npt.ArrayLike, y: npt.ArrayLike) -> Array:
    """Inverse perturbation, the subtraction of compositions: the closed ratio of parts."""
    return close(check_parts(x) / check_parts(y, positive=True))


def clr(x: npt.ArrayLike) -> Array:
    """Centred log-ratio: logarithms less their row mean; each row sums to zero (Aitchison 1986).

    Raises
    ------
    CompositionError
        For zero, negative or infinite parts.
    """
    logs = np.log(check_parts(x, positive=True))
    return np.asarray(logs - logs.mean(axis=-1, keepdims=True))


def clr_inverse(coords: npt.ArrayLike) -> Array:
    """The closed composition of centred (or any other additive) log parts."""
    logs = np.asarray(coords, dtype=np.float64)
    return close(np.exp(logs - logs.max(axis=-1, keepdims=True)))


def inner(x: npt.ArrayLike, y: npt.ArrayLike) -> Array:
    """Aitchison inner product, one number per pair of rows."""
    return np.asarray((clr(x) * clr(y)).sum(axis=-1))


def norm(x: npt.ArrayLike) -> Array:
    """Aitchison norm: the distance from the composition of equal parts."""
    return np.sqrt(inner(x, x))


def distance(x: npt.ArrayLike, y: npt.ArrayLike) -> Array:
    """Aitchison distance between rows; unchanged by units, part order and a common perturbation.

    Examples
    --------
    >>> float(distance([1, 3, 4, 2], [1, 1, 2, 2]).round(8))
    0.94063887
    """
    return np.asarray(np.sqrt(((clr(x) - clr(y)) ** 2).sum(axis=-1)))


def centre(x: npt.ArrayLike) -> Array:
    """The closed geometric mean of complete rows, the mean that fits Aitchison geometry; NaN rows are skipped."""
    return clr_inverse(_complete_clr(x).mean(axis=0))


def variation_matrix(x: npt.ArrayLike) -> Array:
    """Variance (n - 1) of every log-ratio ln(x_i / x_j), shape (D, D); NaN rows are skipped (Aitchison 1986)."""
    covariance = np.atleast_2d(np.cov(_complete_clr(x), rowvar=False, ddof=1))
    spread = np.diag(covariance)
    return np.asarray(spread[:, None] + spread[None, :] - 2.0 * covariance)


def total_variance(x: npt.ArrayLike) -> float:
    """The trace of the clr covariance: all the variance there is, whatever the coordinates."""
    return float(_complete_clr(x).var(axis=0, ddof=1).sum())


def _complete_clr(x: npt.ArrayLike) -> Array:
    coords = clr(np.atleast_2d(np.asarray(x, dtype=np.float64)))
    coords = coords[~np.isnan(coords).any(axis=-1)]
    if len(coords) < 2:
        raise CompositionError(f"{len(coords)} complete rows, expected at least 2 for a centre or a variance")
    return coords


def _refuse(array: Array, bad: npt.NDArray[np.bool_], found: str, expected: str) -> None:
    if bad.any():
        *row, column = np.argwhere(bad)[0]
        where = "row " + ", ".join(str(int(i)) for i in row) if row else "the only row"
        value = array[(*row, column)]
        raise CompositionError(
            f"{where} (counted from 0), column {int(column)}: found {found} ({value:g}), expected {expected}"
        )
