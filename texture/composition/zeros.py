"""Zeros and parts below a detection limit: replaced in place.

A logarithm has no zero. The plain treatment is multiplicative replacement: a part below the limit becomes
0.65 × limit, and the others give way in proportion, so that their ratios stay (Martín-Fernández et al. 2003). Other
treatments: `texture.composition.censoring`, `texture.composition.presence`, and the coordinates of kind ``shares``.

References
----------
Martín-Fernández, J.A., Barceló-Vidal, C. & Pawlowsky-Glahn, V. (2003). Dealing with zeros and missing values in
compositional data sets using nonparametric imputation. Mathematical Geology 35, 253-278.
"""

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array, check_parts
from texture.errors import CompositionError

__all__ = ["REPLACEMENT_RATIO", "replace", "replace_pair"]

REPLACEMENT_RATIO = 0.65
"""Share of the limit that stands in for a smaller part (Martín-Fernández et al. 2003)."""


def replace(fractions: npt.ArrayLike, limit: npt.ArrayLike, ratio: float = REPLACEMENT_RATIO) -> Array:
    """Multiplicative replacement of the parts below `limit` by ``ratio * limit``.

    The sum of each row is kept, ratios between the other parts are unchanged, and rows without small parts come
    back as they were.

    Parameters
    ----------
    fractions : array-like, shape (..., D)
        Fractions of 1. NaN parts stay NaN; the known parts keep their sum.
    limit : float or array-like of shape (D,)
        In fractions of 1. Zero leaves everything as it is.
    ratio : float, default 0.65
        1.0 with ``limit = delta`` puts `delta` itself in place of zeros.

    Raises
    ------
    CompositionError
        If the replaced parts would leave nothing for the others.

    Examples
    --------
    >>> replace([0.0, 0.6, 0.4], 0.01)
    array([0.0065, 0.5961, 0.3974])
    """
    array = check_parts(fractions)
    limits = np.asarray(limit, dtype=np.float64)
    small = array < limits
    delta = np.where(small, ratio * limits, 0.0)
    kept = np.nansum(np.where(small, 0.0, array), axis=-1, keepdims=True)
    left = np.nansum(array, axis=-1, keepdims=True) - delta.sum(axis=-1, keepdims=True)
    touched = small.any(axis=-1, keepdims=True)
    if (touched & (left <= 0) & (kept > 0)).any():
        row = int(np.argmax((touched & (left <= 0) & (kept > 0)).reshape(-1)))
        raise CompositionError(
            f"row {row} (counted from 0): parts below the limit {limits} would be replaced by more than the whole; "
            "use a smaller limit"
        )
    factor = np.where(touched & (kept > 0), left / np.where(kept > 0, kept, 1.0), 1.0)
    return np.where(small, delta, array * factor)


def replace_pair(numerator: Array, denominator: Array, limit: float) -> tuple[Array, Array]:
    """The same replacement for the two sides of one split, their sum kept; NaN where both are below the limit.

    Pure mud says nothing about gravel against sand: replacing both would invent "gravel = sand".
    """
    if limit == 0.0:
        unknown = (numerator == 0) & (denominator == 0)
        return np.where(unknown, np.nan, numerator), np.where(unknown, np.nan, denominator)
    stand_in = REPLACEMENT_RATIO * limit
    total = numerator + denominator
    small_top, small_bottom = numerator < limit, denominator < limit
    top = np.where(small_top, stand_in, np.where(small_bottom, total - stand_in, numerator))
    bottom = np.where(small_bottom, stand_in, np.where(small_top, total - stand_in, denominator))
    unknown = small_top & small_bottom
    top[unknown] = np.nan
    bottom[unknown] = np.nan
    return top, bottom
