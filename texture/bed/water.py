"""The water that grains settle in: density and viscosity from temperature and salinity."""

from __future__ import annotations

import math
from dataclasses import dataclass

from texture.errors import BedError

__all__ = ["GRAVITY", "Water"]

GRAVITY = 9.81
"""Acceleration of gravity in m s-2, the value that the cited formulas were tabulated with."""


@dataclass(frozen=True)
class Water:
    """Sea or fresh water at the surface pressure.

    Density follows the equation of state EOS-80 (UNESCO 1983); viscosity follows Sharqawy et al. (2010)
    divided by that density. Either may be given instead.

    Parameters
    ----------
    temperature_c : float, default 10.0
        Temperature in °C, from −2 to 40.
    salinity : float, default 35.0
        Practical salinity, from 0 to 42.
    density : float, optional
        kg m-3; computed when not given.
    kinematic_viscosity : float, optional
        m2 s-1; computed when not given.

    Raises
    ------
    BedError
        If a value is outside these ranges, or a given density or viscosity is not that of water.

    References
    ----------
    UNESCO (1983). Algorithms for computation of fundamental properties of seawater. Technical papers in
    marine science 44.
    Sharqawy, M. H., Lienhard, J. H., Zubair, S. M. (2010). Thermophysical properties of seawater: a review of
    existing correlations and data. Desalination and Water Treatment 16, 354-380.

    Examples
    --------
    >>> water = Water(temperature_c=10.0, salinity=35.0)
    >>> round(water.density, 2), round(water.kinematic_viscosity * 1e6, 3)
    (1026.95, 1.36)
    >>> Water(density=1027.0, kinematic_viscosity=1.36e-6).density
    1027.0
    """

    temperature_c: float = 10.0
    salinity: float = 35.0
    density: float = math.nan
    kinematic_viscosity: float = math.nan

    def __post_init__(self) -> None:
        _check("temperature_c", self.temperature_c, -2.0, 40.0, "°C")
        _check("salinity", self.salinity, 0.0, 42.0, "")
        if math.isnan(self.density):
            object.__setattr__(self, "density", _density(self.temperature_c, self.salinity))
        if math.isnan(self.kinematic_viscosity):
            dynamic = _dynamic_viscosity(self.temperature_c, self.salinity)
            object.__setattr__(self, "kinematic_viscosity", dynamic / self.density)
        # Wider than any natural water, narrow enough to catch g cm-3 and mm2 s-1.
        _check("density", self.density, 900.0, 1300.0, "kg m-3")
        _check("kinematic_viscosity", self.kinematic_viscosity, 2e-7, 5e-6, "m2 s-1")


def _check(name: str, value: float, low: float, high: float, unit: str) -> None:
    if not low <= value <= high:  # NaN fails too
        raise BedError(f"water: {name} = {value:g}, expected {low:g} to {high:g} {unit}".rstrip())


def _density(t: float, s: float) -> float:
    """EOS-80 at zero pressure, kg m-3."""
    pure = (
        999.842594 + 6.793952e-2 * t - 9.095290e-3 * t**2 + 1.001685e-4 * t**3 - 1.120083e-6 * t**4 + 6.536332e-9 * t**5
    )
    first = 8.24493e-1 - 4.0899e-3 * t + 7.6438e-5 * t**2 - 8.2467e-7 * t**3 + 5.3875e-9 * t**4
    half = -5.72466e-3 + 1.0227e-4 * t - 1.6546e-6 * t**2
    return pure + first * s + half * s * math.sqrt(s) + 4.8314e-4 * s**2


def _dynamic_viscosity(t: float, s: float) -> float:
    """Sharqawy et al. (2010), equations 22 and 23, kg m-1 s-1; salinity in kg per kg there."""
    pure = 4.2844e-5 + 1.0 / (0.157 * (t + 64.993) ** 2 - 91.296)
    salt = s * 1e-3
    first = 1.541 + 1.998e-2 * t - 9.52e-5 * t**2
    second = 7.974 - 7.561e-2 * t + 4.724e-4 * t**2
    return pure * (1.0 + first * salt + second * salt**2)
