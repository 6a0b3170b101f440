"""How fast single grains sink in still water."""

from __future__ import annotations

from collections.abc import Callable
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.grain import check_density, check_diameter, dimensionless_diameter
from texture.bed.water import GRAVITY, Water
from texture.errors import BedError

__all__ = ["rouse_number", "settling_velocity"]

KARMAN = 0.40


def settling_velocity(
    diameter_m: ArrayLike,
    water: Water,
    method: Literal["soulsby", "ferguson_church"] = "soulsby",
    density: ArrayLike = 2650.0,
) -> NDArray[np.float64]:
    """Terminal velocity of a single natural grain.

    Parameters
    ----------
    diameter_m : array-like
        Sieve diameters in metres; NaN gives NaN.
    water : Water
    method : {"soulsby", "ferguson_church"}
        Soulsby (1997): ν / d · (√(10.36² + 1.049 D*³) − 10.36). Ferguson & Church (2004):
        R g d² / (18 ν + √(0.75 R g d³)), natural grains. Soulsby's lies 9 % under Stokes' law for very fine
        grains and both are for grains that sink alone: clay and fine silt sink as flocs, whose speed grain
        size does not determine.
    density : array-like, default 2650.0
        Grain density in kg m-3.

    Returns
    -------
    float array
        m s-1, positive downward.

    Raises
    ------
    BedError
        For an unknown method, or diameters and densities that are out of range.

    References
    ----------
    Soulsby, R. (1997). Dynamics of Marine Sands. Thomas Telford.
    Ferguson, R. I., Church, M. (2004). A simple universal equation for grain settling velocity. Journal of
    Sedimentary Research 74, 933-937.

    Examples
    --------
    >>> settling_velocity([0.2e-3, 1e-3], Water()).round(4)
    array([0.0202, 0.1142])
    """
    if method not in METHODS:
        raise BedError(f'settling velocity: unknown method "{method}"; known: {", ".join(METHODS)}')
    return METHODS[method](check_diameter(diameter_m), water, check_density(density, water))


def _soulsby(diameter: NDArray[np.float64], water: Water, density: NDArray[np.float64]) -> NDArray[np.float64]:
    size = dimensionless_diameter(diameter, water, density)
    # √(a² + b) − a written as b / (√(a² + b) + a): the difference cancels for fine grains.
    lift = 1.049 * size**3
    return np.asarray(water.kinematic_viscosity / diameter * lift / (np.sqrt(10.36**2 + lift) + 10.36))


def _ferguson_church(diameter: NDArray[np.float64], water: Water, density: NDArray[np.float64]) -> NDArray[np.float64]:
    weight = (density / water.density - 1.0) * GRAVITY
    drag = np.sqrt(0.75 * weight * diameter**3)  # C2 = 1, natural grains
    return np.asarray(weight * diameter**2 / (18.0 * water.kinematic_viscosity + drag))


METHODS: dict[str, Callable[[NDArray[np.float64], Water, NDArray[np.float64]], NDArray[np.float64]]] = {
    "soulsby": _soulsby,
    "ferguson_church": _ferguson_church,
}


def rouse_number(settling_velocity_m_s: ArrayLike, friction_velocity_m_s: ArrayLike) -> NDArray[np.float64]:
    """Settling against turbulence, w / (0.40 u*); above about 2.5 a grain stays near the bed.

    Parameters
    ----------
    settling_velocity_m_s, friction_velocity_m_s : array-like
        Broadcast against each other; still water (u* = 0) gives infinity.

    Returns
    -------
    float array

    References
    ----------
    Rouse, H. (1937). Modern conceptions of the mechanics of fluid turbulence. Transactions ASCE 102, 463-543.

    Examples
    --------
    >>> round(float(rouse_number(0.02, 0.05)), 9)
    1.0
    """
    speed = np.asarray(settling_velocity_m_s, dtype=np.float64)
    with np.errstate(divide="ignore"):
        return np.asarray(speed / (KARMAN * np.asarray(friction_velocity_m_s, dtype=np.float64)))
