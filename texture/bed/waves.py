"""Stress on the bed by waves, by a current, and by both together."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.roughness import skin_roughness_length
from texture.bed.water import Water
from texture.errors import BedError

__all__ = [
    "current_stress",
    "friction_factor",
    "rough_friction_factor",
    "smooth_friction_factor",
    "wave_current_stress",
    "wave_stress",
]

KARMAN = 0.40
LAMINAR_REYNOLDS = 5e5
"""Wave Reynolds number up to which the smooth boundary layer is laminar (Soulsby 1997)."""


def rough_friction_factor(excursion_over_roughness: ArrayLike) -> NDArray[np.float64]:
    """Wave friction factor over a rough bed, 1.39 (A / z0)^-0.52 (Soulsby 1997).

    >>> float(rough_friction_factor(1002.676).round(5))
    0.03823
    """
    return np.asarray(1.39 * np.asarray(excursion_over_roughness, dtype=np.float64) ** -0.52)


def smooth_friction_factor(wave_reynolds: ArrayLike) -> NDArray[np.float64]:
    """Wave friction factor over a smooth bed (Soulsby 1997).

    2 R^-0.5 up to R = 5e5 (laminar), 0.0521 R^-0.187 beyond. The step between them, 0.0028 to 0.0045, is in
    the published formula.

    >>> smooth_friction_factor([1e4, 1e6]).round(6)
    array([0.02    , 0.003934])
    """
    reynolds = np.asarray(wave_reynolds, dtype=np.float64)
    return np.where(reynolds <= LAMINAR_REYNOLDS, 2.0 * reynolds**-0.5, 0.0521 * reynolds**-0.187)


def friction_factor(
    orbital_velocity: ArrayLike, period_s: ArrayLike, roughness_length_m: ArrayLike, water: Water
) -> NDArray[np.float64]:
    """Wave friction factor: the larger of the rough and the smooth one (Soulsby 1997).

    Parameters
    ----------
    orbital_velocity : array-like
        Amplitude of the velocity near the bed, m s-1, above 0.
    period_s, roughness_length_m : array-like
        Wave period and z0; all broadcast against each other.
    water : Water
    """
    velocity = np.asarray(orbital_velocity, dtype=np.float64)
    excursion = velocity * np.asarray(period_s, dtype=np.float64) / (2.0 * np.pi)
    rough = rough_friction_factor(excursion / np.asarray(roughness_length_m, dtype=np.float64))
    return np.maximum(rough, smooth_friction_factor(velocity * excursion / water.kinematic_viscosity))


def wave_stress(
    orbital_velocity: ArrayLike, period_s: ArrayLike, diameter_m: ArrayLike, water: Water
) -> NDArray[np.float64]:
    """Amplitude of the skin-friction stress under waves, ½ ρ f_w u².

    Parameters
    ----------
    orbital_velocity : array-like
        Amplitude of the wave velocity near the bed, m s-1: of one wave, or √2 times the rms of a sea.
        Using a significant or largest value instead changes the stress by a factor of up to 2.8.
    period_s : array-like
        Wave period in seconds.
    diameter_m : array-like
        Median grain diameter in metres; z0 = d50 / 12.
    water : Water

    Returns
    -------
    float array
        Pa, broadcast over the inputs; NaN where one of them is; 0 without waves.

    Raises
    ------
    BedError
        For a negative velocity or a period of zero or less.

    References
    ----------
    Soulsby, R. (1997). Dynamics of Marine Sands. Thomas Telford.

    Examples
    --------
    >>> wave_stress([0.0, 0.2, 3.0], [8.0, 8.0, 12.0], 0.2e-3, Water()).round(2)
    array([ 0.  ,  0.21, 11.31])
    """
    velocity = _not_negative("orbital velocity", orbital_velocity, "m s-1")
    period = np.asarray(period_s, dtype=np.float64)
    if (period <= 0.0).any():
        raise BedError(f"wave period {np.nanmin(period):g} s, expected above 0")
    moving = np.where(velocity > 0.0, velocity, np.nan)  # the factor is infinite in still water
    factor = friction_factor(moving, period, skin_roughness_length(diameter_m), water)
    return np.where(velocity == 0.0, 0.0, 0.5 * water.density * factor * velocity**2)


def current_stress(
    depth_mean_velocity: ArrayLike, depth_m: ArrayLike, roughness_length_m: ArrayLike, water: Water
) -> NDArray[np.float64]:
    """Stress of a steady current with a logarithmic profile over the whole depth.

    ρ C_D U² with C_D = (0.40 / (1 + ln(z0 / h)))² (Soulsby 1997).

    Parameters
    ----------
    depth_mean_velocity : array-like
        m s-1; the sign does not matter.
    depth_m, roughness_length_m : array-like
        Water depth and z0. The formula needs depths well above 2.7 z0, where C_D is infinite.
    water : Water

    Returns
    -------
    float array
        Pa.

    Raises
    ------
    BedError
        Where the depth is less than 30 roughness lengths: no logarithmic profile fits in.

    Examples
    --------
    >>> float(current_stress(1.0, 10.0, 0.001, Water(density=1027.0)).round(4))
    2.4376
    """
    depth, roughness = np.asarray(depth_m, np.float64), np.asarray(roughness_length_m, np.float64)
    if (depth < 30.0 * roughness).any():  # 30 z0 = ks: shallower water lies between the grains
        raise BedError("current stress: a depth is less than 30 roughness lengths; mask such cells out")
    drag = (KARMAN / (1.0 + np.log(roughness / depth))) ** 2
    return np.asarray(water.density * drag * np.asarray(depth_mean_velocity, np.float64) ** 2)


def wave_current_stress(
    current_stress: ArrayLike, wave_stress: ArrayLike, angle_deg: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean and largest stress of waves and a current together.

    The waves' turbulence enlarges the mean stress, τm = τc (1 + 1.2 (τw / (τc + τw))^3.2); the largest is the
    vector sum of τm and the waves' amplitude.

    Parameters
    ----------
    current_stress, wave_stress : array-like
        Pa, each as if alone.
    angle_deg : array-like
        Between current and wave direction; 0 and 180 mean the same.

    Returns
    -------
    mean, maximum : float arrays
        Pa, broadcast over the inputs; NaN where one of them is.

    Raises
    ------
    BedError
        For a negative stress.

    References
    ----------
    Soulsby, R. (1997). Dynamics of Marine Sands. Thomas Telford, equations 69 and 70 (coefficients DATA2).

    Examples
    --------
    >>> mean, maximum = wave_current_stress(2.437632, 4.907855, 30.0)
    >>> round(float(mean), 4), round(float(maximum), 4)
    (3.2425, 7.8845)
    """
    current = _not_negative("current stress", current_stress, "Pa")
    wave = _not_negative("wave stress", wave_stress, "Pa")
    total = current + wave
    ratio = np.divide(wave, total, out=np.zeros_like(total), where=total != 0.0)
    mean = current * (1.0 + 1.2 * ratio**3.2)
    angle = np.radians(np.asarray(angle_deg, dtype=np.float64))
    return np.asarray(mean), np.hypot(mean + wave * np.abs(np.cos(angle)), wave * np.sin(angle))


def _not_negative(name: str, values: ArrayLike, unit: str) -> NDArray[np.float64]:
    array = np.asarray(values, dtype=np.float64)
    if (array < 0.0).any():
        raise BedError(f"{name} {np.nanmin(array):g} {unit}, expected 0 or more")
    return array
