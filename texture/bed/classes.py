"""The sediment classes of the model as arrays, with what is computed and what nobody gave."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from texture.bed.cells import Floats
from texture.bed.grain import check_density, check_diameter
from texture.bed.settling import settling_velocity
from texture.bed.threshold import critical_stress
from texture.bed.water import Water
from texture.errors import BedError
from texture.recipe import BedClass

__all__ = ["COMPUTED_ABOVE_M", "ClassProperties", "class_properties"]

COMPUTED_ABOVE_M = 63e-6
"""Finer grains stick and clump: their settling and strength are not in their size and must be given."""

Source = Literal["given", "computed", "not given"]


@dataclass(frozen=True, eq=False)
class ClassProperties:
    """Properties of k classes, in the order of the recipe.

    Attributes
    ----------
    names : tuple of str
    part : int array, shape (k,)
        Index of the part that the class is a share of.
    share : float array, shape (k,)
    diameter_m, density_kg_m3 : float arrays, shape (k,)
    settling_velocity_m_s, critical_stress_pa : float arrays, shape (k,)
        NaN where not given and not computed.
    erosion_rate : float array, shape (k,)
        kg m-2 s-1 for the form `excess_ratio`, kg m-2 s-1 Pa-1 for `excess_stress`; NaN where not given.
    form, kind : tuples of str
    settling_source, stress_source : tuples of {"given", "computed", "not given"}
    dry_density_kg_m3 : float array, shape (k,)
        Of a bed of the class alone; NaN where not given.
    effective_density_kg_m3 : float array, shape (k,)
        Of flocs, above the water's; NaN for grains and where not given.
    """

    names: tuple[str, ...]
    part: NDArray[np.int64]
    share: Floats
    diameter_m: Floats
    density_kg_m3: Floats
    settling_velocity_m_s: Floats
    critical_stress_pa: Floats
    erosion_rate: Floats
    form: tuple[str, ...]
    kind: tuple[str, ...]
    settling_source: tuple[Source, ...]
    stress_source: tuple[Source, ...]
    dry_density_kg_m3: Floats
    effective_density_kg_m3: Floats

    @property
    def loose(self) -> NDArray[np.bool_]:
        """Single grains without cohesion, above 63 µm, shape (k,)."""
        return np.array([kind == "grain" for kind in self.kind]) & (self.diameter_m > COMPUTED_ABOVE_M)

    @property
    def not_given(self) -> tuple[str, ...]:
        """What the model will have to be told by hand, such as `"mud: settling velocity"`."""
        missing = []
        for i, name in enumerate(self.names):
            if self.settling_source[i] == "not given":
                missing.append(f"{name}: settling velocity")
            if self.stress_source[i] == "not given":
                missing.append(f"{name}: critical stress")
            if np.isnan(self.erosion_rate[i]):
                missing.append(f"{name}: erosion rate")
            if self.kind[i] == "floc" and np.isnan(self.effective_density_kg_m3[i]):
                missing.append(f"{name}: effective density")
        return tuple(missing)


def class_properties(
    classes: Sequence[BedClass], water: Water, parts: Sequence[str] = ("mud", "sand", "gravel")
) -> ClassProperties:
    """Collect the classes' properties; compute settling and strength of single grains above 63 µm.

    Parameters
    ----------
    classes : sequence of BedClass
    water : Water
        Sets settling velocity (Soulsby 1997) and critical stress (Soulsby & Whitehouse 1997).
    parts : sequence of str
        Order of the parts of the map.

    Raises
    ------
    BedError
        If a class has no diameter, or a diameter or density no grain has.

    Examples
    --------
    >>> from texture.recipe import Bed
    >>> found = class_properties(Bed().classes, Water())
    >>> found.critical_stress_pa.round(3)
    array([  nan, 0.189, 6.929])
    >>> found.not_given[:2]
    ('mud: settling velocity', 'mud: critical stress')
    """
    settling = [_settling(c, water) for c in classes]
    stress = [_stress(c, water) for c in classes]
    return ClassProperties(
        names=tuple(c.name for c in classes),
        part=np.array([list(parts).index(c.part) for c in classes], dtype=np.int64),
        share=np.array([c.share for c in classes]),
        diameter_m=np.array([_diameter(c, water) for c in classes]),
        density_kg_m3=np.array([c.grain.density_kg_m3 for c in classes]),
        settling_velocity_m_s=np.array([value for value, _ in settling]),
        critical_stress_pa=np.array([value for value, _ in stress]),
        erosion_rate=_or_nan(c.erosion.rate for c in classes),
        form=tuple(c.erosion.form for c in classes),
        kind=tuple(c.kind for c in classes),
        settling_source=tuple(source for _, source in settling),
        stress_source=tuple(source for _, source in stress),
        dry_density_kg_m3=_or_nan(c.packing.dry_density_kg_m3 for c in classes),
        effective_density_kg_m3=_or_nan(c.water_column.effective_density_kg_m3 for c in classes),
    )


def _or_nan(values: Iterable[float | None]) -> Floats:
    return np.array([np.nan if value is None else value for value in values])


def _diameter(c: BedClass, water: Water) -> float:
    diameter = c.grain.diameter_m
    if diameter is None:
        raise BedError(
            f'bed.classes "{c.name}": grain.diameter_m is missing; porosity and roughness of the bed need it, '
            "for flocs the size of the grains they are made of"
        )
    try:
        check_diameter(diameter)
        check_density(c.grain.density_kg_m3, water)
    except BedError as error:
        raise BedError(f'bed.classes "{c.name}": {error}') from error
    return diameter


def _single_grain(c: BedClass) -> bool:
    return c.kind == "grain" and c.grain.diameter_m is not None and c.grain.diameter_m > COMPUTED_ABOVE_M


def _settling(c: BedClass, water: Water) -> tuple[float, Source]:
    if c.water_column.settling_velocity_m_s is not None:
        return c.water_column.settling_velocity_m_s, "given"
    if not _single_grain(c):
        return np.nan, "not given"
    return float(settling_velocity(_diameter(c, water), water, density=c.grain.density_kg_m3)), "computed"


def _stress(c: BedClass, water: Water) -> tuple[float, Source]:
    if c.erosion.critical_stress_pa is not None:
        return c.erosion.critical_stress_pa, "given"
    if not _single_grain(c):
        return np.nan, "not given"
    return float(critical_stress(_diameter(c, water), water, density=c.grain.density_kg_m3)), "computed"
