"""Roughness of the grains themselves."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.grain import check_diameter

__all__ = ["skin_roughness_length"]


def skin_roughness_length(median_diameter_m: ArrayLike) -> NDArray[np.float64]:
    """Roughness length z0 of a flat bed of grains, d50 / 12.

    That is Nikuradse's ks = 2.5 d50 with z0 = ks / 30. It is the roughness that the grains feel (skin
    friction), not that of ripples and other forms, which sets most of the drag on a current.

    Parameters
    ----------
    median_diameter_m : array-like
        NaN gives NaN.

    Returns
    -------
    float array
        z0 in metres.

    References
    ----------
    Soulsby, R. (1997). Dynamics of Marine Sands. Thomas Telford.

    Examples
    --------
    >>> float(skin_roughness_length(0.24e-3))
    2e-05
    """
    return np.asarray(check_diameter(median_diameter_m) / 12.0)
