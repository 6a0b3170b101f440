"""The stress at which single grains begin to move."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.grain import check_density, check_diameter, dimensionless_diameter
from texture.bed.water import GRAVITY, Water

__all__ = ["critical_shields", "critical_stress"]


def critical_shields(dimensionless_diameter: ArrayLike) -> NDArray[np.float64]:
    """Critical Shields parameter from D*, 0.30 / (1 + 1.2 D*) + 0.055 (1 − exp(−0.020 D*)).

    Parameters
    ----------
    dimensionless_diameter : array-like
        D* of `texture.bed.grain.dimensionless_diameter`; NaN gives NaN.

    Returns
    -------
    float array
        Without unit: 0.30 for the finest grains, 0.055 for the coarsest, smallest near D* = 17.
    """
    size = np.asarray(dimensionless_diameter, dtype=np.float64)
    return np.asarray(0.30 / (1.0 + 1.2 * size) - 0.055 * np.expm1(-0.020 * size))


def critical_stress(diameter_m: ArrayLike, water: Water, density: ArrayLike = 2650.0) -> NDArray[np.float64]:
    """Bed shear stress at which loose grains of one size begin to move.

    Parameters
    ----------
    diameter_m : array-like
        Grain diameters in metres; NaN gives NaN.
    water : Water
    density : array-like, default 2650.0
        Grain density in kg m-3.

    Returns
    -------
    float array
        Pa. For grains without cohesion: below about 63 µm a bed's strength depends on packing, clay and
        organisms, and this formula does not know it.

    Raises
    ------
    BedError
        If diameters or densities are out of range.

    References
    ----------
    Soulsby, R. L., Whitehouse, R. J. S. (1997). Threshold of sediment motion in coastal environments.
    Proceedings Pacific Coasts and Ports '97, Christchurch, 149-154.

    Examples
    --------
    >>> critical_stress([0.2e-3, 2e-3], Water()).round(3)
    array([0.176, 1.166])
    """
    diameter, grain = check_diameter(diameter_m), check_density(density, water)
    shields = critical_shields(dimensionless_diameter(diameter, water, grain))
    return np.asarray(shields * GRAVITY * (grain - water.density) * diameter)
