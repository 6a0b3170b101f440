"""Which sediment a named condition of waves and current would move: a screen of the starting bed, no forecast."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.bed import Bed
from texture.bed.cells import Bools, Cells, Floats
from texture.bed.water import Water
from texture.bed.waves import current_stress, wave_current_stress, wave_stress
from texture.errors import BedError

__all__ = ["Condition", "Moved", "equivalent_amplitude", "moved_by", "skin_stress"]

FLUSH_RATIO = 3.0
"""Stress over critical stress beyond which mud in fair weather is said to be flushed: common practice, no source."""
MUDDY = 0.1
"""Share of grains below 63 µm and flocs from which a cell is called muddy here."""


@dataclass(frozen=True, eq=False)
class Condition:
    """Waves and a current on n cells.

    Attributes
    ----------
    name : str
    orbital_velocity_m_s, period_s : float arrays, shape (n,) or (times, n)
        Near the bed; velocity 0 without waves, its period then does not matter.
    kind : {"rms", "significant", "peak"}
        What the velocity is.
    current_m_s, depth_m : float arrays, shape (n,) or (times, n)
        Depth-mean speed, and the depth it flows in.
    angle_deg : float
        Between waves and current.
    fair_weather : bool
    flush_ratio : float
        See `Moved.flushed`.
    hours : float
        How long it lasts; NaN where not said.
    """

    name: str
    orbital_velocity_m_s: Floats
    period_s: Floats
    kind: Literal["rms", "significant", "peak"]
    current_m_s: Floats
    depth_m: Floats
    angle_deg: float = 0.0
    fair_weather: bool = False
    flush_ratio: float = FLUSH_RATIO
    hours: float = np.nan

    def each(self) -> Iterator[Condition]:
        """The condition at each of its times; itself where it has no series."""
        names = ("orbital_velocity_m_s", "period_s", "current_m_s", "depth_m")
        lengths = [len(getattr(self, name)) for name in names if getattr(self, name).ndim == 2]
        if not lengths:
            yield self
            return
        for i in range(lengths[0]):
            values = {name: getattr(self, name) for name in names}
            yield replace(self, **{name: v[i] if v.ndim == 2 else v for name, v in values.items()})


@dataclass(frozen=True, eq=False)
class Moved:
    """What a condition would move.

    Attributes
    ----------
    name : str
    fair_weather : bool
    stress_pa : float array, shape (n,)
        Largest skin-friction stress in a wave period, and of all times; NaN on land and where there is no value.
    median_pa, largest_pa : float
        Over the water area, and of all cells.
    unknown_share : float
        Share of the water area without a value.
    moving_share : dict
        Class → share of the water area where it lies at the surface and moves; NaN for a class whose critical
        stress is not known. Of a series, the mean over its times.
    moving_hours : dict
        Class → hours above its threshold, on average over the area where it lies at the surface; NaN where the
        condition does not say how long it lasts, and for a class that lies nowhere or whose critical stress is not known.
    flushed : bool array, shape (n,)
        Muddy cells (a tenth of the surface or more) under a fair-weather stress beyond `flush_ratio` times the
        mud's critical stress: a model would flush that bed at once.
    flushed_share : float
        Share of the water area; NaN when it is no fair-weather condition, or the mud's critical stress is not known.
    rim_share : float
        Share of the rim's own area (weight 1) where more than half of its mass moves; NaN without a rim.
    """

    name: str
    fair_weather: bool
    stress_pa: Floats
    median_pa: float
    largest_pa: float
    unknown_share: float
    moving_share: dict[str, float]
    moving_hours: dict[str, float]
    flushed: Bools
    flushed_share: float
    rim_share: float


def equivalent_amplitude(velocity_m_s: ArrayLike, kind: Literal["rms", "significant", "peak"]) -> NDArray[np.float64]:
    """Amplitude of the single wave that stands for a sea in the friction formulas: √2 times its rms velocity.

    Parameters
    ----------
    velocity_m_s : array-like
    kind : {"rms", "significant", "peak"}
        A significant value is twice the rms; the amplitude of one wave is itself.

    References
    ----------
    Soulsby, R. (1997). Dynamics of Marine Sands. Thomas Telford, section 4.4.

    Examples
    --------
    >>> [round(float(equivalent_amplitude(1.0, kind)), 3) for kind in ("rms", "significant", "peak")]
    [1.414, 0.707, 1.0]
    """
    factors = {"rms": np.sqrt(2.0), "significant": np.sqrt(0.5), "peak": 1.0}
    if kind not in factors:
        raise BedError(f'orbital velocity: unknown kind "{kind}"; known: {", ".join(factors)}')
    return np.asarray(np.asarray(velocity_m_s, dtype=np.float64) * factors[kind])


def skin_stress(condition: Condition, diameter_m: Floats, roughness_m: Floats, water: Water, wet: Bools) -> Floats:
    """Largest skin-friction stress of a condition in each cell.

    Parameters
    ----------
    condition : Condition
    diameter_m, roughness_m : float arrays, shape (n,)
        Median diameter and z0 of the surface.
    water : Water
    wet : bool array, shape (n,)

    Returns
    -------
    float array, shape (n,)
        Pa; NaN on land, where a value is missing, and where a current is asked for in water less than 30
        roughness lengths deep.

    Raises
    ------
    BedError
        For a negative velocity or a period of zero.
    """
    amplitude = equivalent_amplitude(condition.orbital_velocity_m_s[wet], condition.kind)
    period = np.where(amplitude == 0.0, 1.0, condition.period_s[wet])
    waves = wave_stress(amplitude, period, diameter_m[wet], water)
    speed, depth, z0 = condition.current_m_s[wet], condition.depth_m[wet], roughness_m[wet]
    flowing = speed != 0.0
    deep = flowing & (depth >= 30.0 * z0)
    current = np.where(flowing, np.nan, 0.0)
    current[deep] = current_stress(speed[deep], depth[deep], z0[deep], water)
    stress = np.full(wet.size, np.nan)
    stress[wet] = wave_current_stress(current, waves, condition.angle_deg)[1]
    return stress


def moved_by(condition: Condition, bed: Bed, cells: Cells, water: Water) -> Moved:
    """Compare a condition's stress with what the bed's surface can bear.

    A class moves where the stress on the grains exceeds its critical stress, hiding and exposure included where
    the bed has them. No ripples, no armouring, no cover of one class by another.
    """
    wet, classes = cells.active, bed.classes
    area = np.where(wet, cells.area_m2, 0.0)
    total = area.sum()
    strength = np.broadcast_to(bed.class_critical_stress[:, :1], (len(classes.names), wet.size))
    factor = bed.hiding_exposure_factor
    if factor is not None:
        strength = strength * factor[:, 0]
    surface = bed.class_fraction[:, 0]
    known = np.isfinite(bed.class_critical_stress[:, 0])
    rim = wet & (bed.rim_weight == 1.0)
    stress = np.full(wet.size, np.nan)
    moving, eroding, times = np.zeros(len(known)), np.zeros(wet.size, dtype=bool), 0
    diameter_m, roughness_m = bed.surface_median_diameter, bed.skin_roughness_length
    for now in condition.each():
        here = skin_stress(now, diameter_m, roughness_m, water, wet)
        moves = (here > strength) & (surface > 0.0)
        moving += [area[row].sum() for row in moves]  # no matrix product: its digits depend on the number of threads
        eroding |= np.where(moves, surface, 0.0).sum(axis=0) > 0.5
        stress, times = np.fmax(stress, here), times + 1
    moving /= times
    lies = np.array([area[row > 0.0].sum() for row in surface])
    told = known & (lies > 0.0)
    hours = condition.hours * np.divide(moving, lies, out=np.full_like(moving, np.nan), where=told)
    flushed, flushed_told = _flushed(condition, stress, surface, strength, ~classes.loose, known)
    measured = np.isfinite(stress)
    return Moved(
        name=condition.name,
        fair_weather=condition.fair_weather,
        stress_pa=stress,
        median_pa=_median(stress[measured], area[measured]),
        largest_pa=float(stress[measured].max(initial=0.0)),
        unknown_share=float(area[~measured].sum() / total),
        moving_share=dict(zip(classes.names, np.where(known, moving / total, np.nan).tolist(), strict=True)),
        moving_hours=dict(zip(classes.names, hours.tolist(), strict=True)),
        flushed=flushed,
        flushed_share=float(area[flushed].sum() / total) if flushed_told else np.nan,
        rim_share=float(area[rim & eroding].sum() / area[rim].sum()) if rim.any() else np.nan,
    )


def _flushed(
    condition: Condition, stress: Floats, surface: Floats, strength: Floats, fine: Bools, known: Bools
) -> tuple[Bools, bool]:
    """Muddy cells far beyond the mud's strength, and whether that can be told at all."""
    mud = surface[fine].sum(axis=0)
    told = condition.fair_weather and bool(known[fine & (surface > 0.0).any(axis=1)].all())
    if not told:
        return np.zeros(stress.size, dtype=bool), False
    mean = (np.nan_to_num(strength[fine]) * surface[fine]).sum(axis=0)  # unknown only where there is no mass
    limit = np.divide(mean, mud, out=np.full_like(mud, np.inf), where=mud > 0.0)
    return (mud >= MUDDY) & (stress > condition.flush_ratio * limit), True


def _median(values: Floats, weights: Floats) -> float:
    if values.size == 0:
        return np.nan
    order = np.argsort(values, kind="stable")
    return float(values[order][np.searchsorted(np.cumsum(weights[order]), weights.sum() / 2.0)])
