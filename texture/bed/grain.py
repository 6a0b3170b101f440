"""Checks and the dimensionless size shared by the formulas about single grains."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.water import GRAVITY, Water
from texture.errors import BedError

__all__ = ["check_density", "check_diameter", "dimensionless_diameter"]

LARGEST_M = 1.0
"""Grain diameters above this are taken for a mistaken unit (1 mm typed as 1, 250 µm as 250)."""


def check_diameter(diameter_m: ArrayLike) -> NDArray[np.float64]:
    """Return the diameters as float64; NaN is let through.

    Raises
    ------
    BedError
        For a diameter of zero or less, or of a metre and more.
    """
    diameter = np.asarray(diameter_m, dtype=np.float64)
    wrong = (diameter <= 0.0) | (diameter >= LARGEST_M)
    if wrong.any():
        raise BedError(
            f"grain diameter {diameter[wrong].flat[0]:g} m, expected above 0 and below {LARGEST_M:g} m; "
            "diameters are in metres (250 µm = 250e-6)"
        )
    return diameter


def check_density(density: ArrayLike, water: Water) -> NDArray[np.float64]:
    """Return the grain densities as float64; they must exceed the water's.

    Raises
    ------
    BedError
        For a grain that would float.
    """
    grain = np.asarray(density, dtype=np.float64)
    if (grain <= water.density).any():
        raise BedError(
            f"grain density {grain.min():g} kg m-3 is not above the water's {water.density:.1f}; the grain would not settle"
        )
    return grain


def dimensionless_diameter(diameter_m: ArrayLike, water: Water, density: ArrayLike = 2650.0) -> NDArray[np.float64]:
    """Grain size against viscosity and weight, D* = d (g (s − 1) / ν²)^(1/3), with s = ρs / ρ.

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
        Without unit.
    """
    ratio = check_density(density, water) / water.density
    scale = np.cbrt(GRAVITY * (ratio - 1.0) / water.kinematic_viscosity**2)
    return np.asarray(check_diameter(diameter_m) * scale)
