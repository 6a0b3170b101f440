"""A case of a sensitivity set: the bed's settings with some of them changed, and whether they still make sense together."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from texture.bed.cells import Floats
from texture.bed.classes import ClassProperties, class_properties
from texture.bed.mixture_packing import class_dry_density
from texture.bed.water import Water
from texture.errors import BedError
from texture.recipe import Bed as BedSettings
from texture.recipe import Rim, Vary

__all__ = ["CaseBed", "OrderError", "change_bed"]

MOST_POROSITY = 0.98
KEYS = {
    "settling_velocity": ("water_column", "settling_velocity_m_s", "settling_velocity_m_s"),
    "critical_stress": ("erosion", "critical_stress_pa", "critical_stress_pa"),
    "erosion_rate": ("erosion", "rate", "erosion_rate"),
    "diameter": ("grain", "diameter_m", "diameter_m"),
}
ORDERED = {"settling_velocity_m_s": ("settles slower than", "m/s"), "diameter_m": ("is finer than", "m")}


class OrderError(BedError):
    """A case in which classes have changed places, such as mud that settles faster than sand."""


@dataclass(frozen=True, eq=False)
class CaseBed:
    """What a case's bed is made by.

    Attributes
    ----------
    bed : texture.recipe.Bed
    rim : texture.recipe.Rim or None
    porosity : callable or None
        From the porosity that the recipe's packing gives to the case's.
    """

    bed: BedSettings
    rim: Rim | None
    porosity: Callable[[Floats], Floats] | None


def change_bed(
    bed: BedSettings, rim: Rim | None, changes: Mapping[Vary, Any], parts: tuple[str, ...] = ("mud", "sand", "gravel")
) -> CaseBed:
    """Change the settings of a bed.

    Parameters
    ----------
    bed, rim
        Of the recipe.
    changes : mapping of Vary to its value in this case
        A factor where the vary has factors, else the value itself. Those of the map are left alone here.
    parts : tuple of str

    Raises
    ------
    OrderError
        If classes change places: of two classes, the one that settled slower in the recipe has to settle slower still,
        and the finer one to be finer.
    BedError
        If a value is to be multiplied that nobody gave, a class or a layer is not there, or a porosity leaves no grains.

    Examples
    --------
    >>> faster = Vary(what="settling_velocity", classes=("sand",), factors=(2.0,))
    >>> case = change_bed(BedSettings(), None, {faster: 2.0})
    >>> round(case.bed.classes[1].water_column.settling_velocity_m_s / 0.02874, 2)
    2.0
    """
    water = Water(bed.water.temperature_c, bed.water.salinity)
    before = class_properties(bed.classes, water, parts)
    porosity = None
    # Diameters first: what is computed from them follows, and is multiplied after that.
    for vary, value in sorted(changes.items(), key=lambda item: item[0].what != "diameter"):
        if vary.what in KEYS:
            bed = _with_classes(bed, vary, value, class_properties(bed.classes, water, parts))
        elif vary.what == "thickness":
            bed = _with_thickness(bed, vary, value)
        elif vary.what == "rim_width":
            rim = _with_width(rim, vary, value)
        elif vary.what == "porosity":
            porosity = _porosity(vary, float(value), before)
    after = class_properties(bed.classes, water, parts)
    for name, (words, unit) in ORDERED.items():
        _check_order(name, words, unit, before, after)
    return CaseBed(bed, rim, porosity)


def _with_classes(bed: BedSettings, vary: Vary, value: float, now: ClassProperties) -> BedSettings:
    group, key, attribute = KEYS[vary.what]
    known = getattr(now, attribute)
    for name in vary.classes:
        if name not in now.names:
            raise BedError(f'sensitivity: {vary.what}: no class "{name}"; the bed has {", ".join(now.names)}')
    chosen = vary.classes or tuple(n for n, v in zip(now.names, known, strict=True) if np.isfinite(v))
    if not chosen:
        raise BedError(f"sensitivity: {vary.what}: no class of the bed has one; give it in bed.classes, or values here")
    classes = []
    for c, own in zip(bed.classes, known, strict=True):
        if c.name in chosen:
            if vary.factors is not None and not np.isfinite(own):
                raise BedError(
                    f'sensitivity: {vary.what} of "{c.name}" is not given, so there is nothing to multiply; give it in '
                    "bed.classes, or values here"
                )
            new = float(own) * value if vary.factors is not None else float(value)
            inner = getattr(c, group).model_copy(update={key: new})
            c = c.model_copy(update={group: inner})
        classes.append(c)
    bed = bed.model_copy(update={"classes": tuple(classes)})
    return _with_layer_stress(bed, chosen, vary, value) if vary.what == "critical_stress" else bed


def _with_layer_stress(bed: BedSettings, chosen: tuple[str, ...], vary: Vary, value: float) -> BedSettings:
    """The strength that layers give their classes changes with that of the classes."""
    layers = []
    for layer in bed.layers:
        own = {
            name: (stress * value if vary.factors is not None else float(value)) if name in chosen else stress
            for name, stress in layer.critical_stress_pa.items()
        }
        layers.append(layer.model_copy(update={"critical_stress_pa": own}))
    return bed.model_copy(update={"layers": tuple(layers)})


def _with_thickness(bed: BedSettings, vary: Vary, value: float) -> BedSettings:
    for number in vary.layers:
        if number > len(bed.layers):
            raise BedError(f"sensitivity: thickness: no layer {number}; the bed has {len(bed.layers)}")
    layers = []
    for i, layer in enumerate(bed.layers, start=1):
        if not vary.layers or i in vary.layers:
            new = layer.thickness_m * value if vary.factors is not None else float(value)
            if new < bed.minimum_thickness_m:
                raise BedError(
                    f"sensitivity: thickness: layer {i} would be {new:g} m, less than bed.minimum_thickness_m = "
                    f"{bed.minimum_thickness_m:g}"
                )
            layer = layer.model_copy(update={"thickness_m": new})
        layers.append(layer)
    return bed.model_copy(update={"layers": tuple(layers)})


def _with_width(rim: Rim | None, vary: Vary, value: float) -> Rim:
    if rim is None:
        raise BedError("sensitivity: rim_width: the recipe has no [rim]; add one, or leave rim_width out")
    if rim.width_m is not None:
        return rim.model_copy(update={"width_m": rim.width_m * value if vary.factors is not None else float(value)})
    cells = (rim.width_cells or 1) * value if vary.factors is not None else value
    return rim.model_copy(update={"width_cells": max(1, round(cells))})


def _porosity(vary: Vary, value: float, classes: ClassProperties) -> Callable[[Floats], Floats]:
    if vary.factors is None:
        return lambda pores: np.full_like(pores, value)
    most = float((1.0 - class_dry_density(classes) / classes.density_kg_m3).max()) * value
    if most > MOST_POROSITY:
        raise BedError(
            f"sensitivity: porosity × {value:g} would make {most:.2f} of the finest class, expected at most {MOST_POROSITY}; "
            "give smaller factors, or values"
        )
    return lambda pores: np.minimum(pores * value, MOST_POROSITY)


def _check_order(name: str, words: str, unit: str, before: ClassProperties, after: ClassProperties) -> None:
    old, new = getattr(before, name), getattr(after, name)
    for i in range(len(old)):
        for j in range(len(old)):
            if old[i] < old[j] and not new[i] < new[j]:
                raise OrderError(
                    f'"{before.names[i]}" ({new[i]:.3g} {unit}) no longer {words} "{before.names[j]}" ({new[j]:.3g} {unit})'
                )
