"""Water motion near the bed under linear waves."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.water import GRAVITY
from texture.errors import BedError

__all__ = ["orbital_velocity", "rms_orbital_velocity", "wave_number"]


def wave_number(period_s: ArrayLike, depth_m: ArrayLike) -> NDArray[np.float64]:
    """Wave number k of linear waves, ω² = g k tanh(k h).

    Parameters
    ----------
    period_s, depth_m : array-like
        Above zero; broadcast against each other.

    Returns
    -------
    float array
        m-1, to double precision.

    Raises
    ------
    BedError
        For a period or depth of zero or less.

    Examples
    --------
    >>> float(wave_number(8.0, 20.0).round(5))
    0.07076
    """
    period, depth = _positive("wave period", period_s, "s"), _positive("depth", depth_m, "m")
    deep = (2.0 * np.pi / period) ** 2 * depth / GRAVITY  # k h in deep water
    kh = deep / np.sqrt(np.tanh(deep))
    # Newton's steps on x tanh x = deep; the start is Eckart's (1952), within 5 %, so that five steps reach the last digit.
    for _ in range(5):
        tanh = np.tanh(kh)
        kh = kh - (kh * tanh - deep) / (tanh + kh * (1.0 - tanh**2))
    return np.asarray(kh / depth)


def orbital_velocity(height_m: ArrayLike, period_s: ArrayLike, depth_m: ArrayLike) -> NDArray[np.float64]:
    """Amplitude of the water's velocity at the bed under one linear wave, π H / (T sinh k h).

    Parameters
    ----------
    height_m : array-like
        Wave height, crest to trough.
    period_s, depth_m : array-like

    Returns
    -------
    float array
        m s-1; the water's excursion is T / 2 π times this.

    Examples
    --------
    >>> float(orbital_velocity(2.0, 8.0, 20.0).round(4))
    0.4054
    """
    kh = wave_number(period_s, depth_m) * np.asarray(depth_m, dtype=np.float64)
    # 1 / sinh written with exp(-kh): sinh overflows in deep water
    speed = np.pi * np.asarray(height_m, np.float64) / np.asarray(period_s, np.float64)
    return np.asarray(speed * 2.0 * np.exp(-kh) / -np.expm1(-2.0 * kh))


def rms_orbital_velocity(
    significant_height_m: ArrayLike, zero_crossing_period_s: ArrayLike, depth_m: ArrayLike
) -> NDArray[np.float64]:
    """Root-mean-square velocity at the bed under a JONSWAP sea.

    U = 0.25 Hs / Tn / (1 + A t²)³ with Tn = √(h / g), t = Tn / Tz, A = (6500 + (0.56 + 15.54 t)⁶)^(1/6).

    Parameters
    ----------
    significant_height_m, zero_crossing_period_s, depth_m : array-like
        Broadcast against each other.

    Returns
    -------
    float array
        m s-1, root mean square. The amplitude of the wave that stands for the sea is √2 times this.

    References
    ----------
    Soulsby, R. L. (2006). Simplified calculation of wave orbital velocities. HR Wallingford TR 155.

    Examples
    --------
    >>> float(rms_orbital_velocity(3.0, 8.0, 20.0).round(4))
    0.3526
    """
    period = _positive("wave period", zero_crossing_period_s, "s")
    scale = np.sqrt(_positive("depth", depth_m, "m") / GRAVITY)
    t = scale / period
    a = (6500.0 + (0.56 + 15.54 * t) ** 6) ** (1.0 / 6.0)
    return np.asarray(0.25 * np.asarray(significant_height_m, np.float64) / scale / (1.0 + a * t**2) ** 3)


def _positive(name: str, values: ArrayLike, unit: str) -> NDArray[np.float64]:
    array = np.asarray(values, dtype=np.float64)
    if (array <= 0.0).any():
        raise BedError(f"{name} {np.nanmin(array):g} {unit}, expected above 0")
    return array
