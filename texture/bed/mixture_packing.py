"""Porosity and dry density of a bed that is a mixture, by the rule that the recipe names."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Literal

import numpy as np

from texture.bed.cells import Floats
from texture.bed.classes import ClassProperties
from texture.bed.mixture import weighted
from texture.bed.packing import dry_density, porosity
from texture.errors import BedError
from texture.recipe import Layer

__all__ = ["PACKING_WORDS", "Packer", "class_dry_density", "mixture_packing", "packer", "repacked", "volumes_add_up"]

Packer = Callable[[Floats, Floats], tuple[Floats, Floats]]
"""From fractions (k, layer, n) and median diameter (layer, n) to porosity and dry density (layer, n)."""

PACKING_WORDS = {
    "mixture": "Wu and Wang (2006) from the median diameter of the mixture",
    "class": "volumes of the classes add up (Colby 1963), each with its own dry density",
    "layer": "given for each layer",
}


def packer(method: Literal["mixture", "class", "layer"], classes: ClassProperties, layers: Sequence[Layer]) -> Packer:
    """Choose the rule.

    Parameters
    ----------
    method : {"mixture", "class", "layer"}
        See `PACKING_WORDS`.
    classes : ClassProperties
    layers : sequence of Layer
        `dry_density_kg_m3` is used by "layer".

    Raises
    ------
    BedError
        On use, when a layer's given dry density leaves no pores.
    """
    if method == "class":
        return lambda fraction, _: volumes_add_up(fraction, classes.density_kg_m3, class_dry_density(classes))
    if method == "layer":
        given = np.array([layer.dry_density_kg_m3 or np.nan for layer in layers])
        return lambda fraction, _: _given(fraction, classes.density_kg_m3, given)
    return lambda fraction, median: mixture_packing(fraction, classes.density_kg_m3, median)


def repacked(pack: Packer, porosity: Callable[[Floats], Floats]) -> Packer:
    """The same grains with other pores: dry density falls as they grow."""

    def again(fraction: Floats, median: Floats) -> tuple[Floats, Floats]:
        pores, density = pack(fraction, median)
        new = porosity(pores)
        return new, density * (1.0 - new) / (1.0 - pores)

    return again


def mixture_packing(fraction: Floats, density_kg_m3: Floats, median_diameter_m: Floats) -> tuple[Floats, Floats]:
    """Porosity by Wu & Wang (2006) from the mixture's median diameter, and the dry density that follows.

    The grains' volumes add up, so that their joint density is the harmonic mean of the classes' by mass.

    Parameters
    ----------
    fraction : float array, shape (k, …)
    density_kg_m3 : float array, shape (k,)
        Grain densities.
    median_diameter_m : float array, shape (…)

    Returns
    -------
    porosity, dry_density : float arrays, shape (…)
        Without unit, and in kg m-3.
    """
    pores = porosity(median_diameter_m)
    return pores, dry_density(pores, 1.0 / weighted(1.0 / density_kg_m3, fraction))


def class_dry_density(classes: ClassProperties) -> Floats:
    """Dry density of each class alone, shape (k,): given, or by Wu & Wang (2006) from its own diameter."""
    computed = dry_density(porosity(classes.diameter_m), classes.density_kg_m3)
    return np.where(np.isnan(classes.dry_density_kg_m3), computed, classes.dry_density_kg_m3)


def volumes_add_up(fraction: Floats, density_kg_m3: Floats, class_dry_density_kg_m3: Floats) -> tuple[Floats, Floats]:
    """Porosity and dry density of a mixture in which every class keeps the volume that it fills alone.

    1 / ρ = Σ f / ρ_k. Sand whose pores are packed with mud is denser than that: this is the looser bound.

    Parameters
    ----------
    fraction : float array, shape (k, …)
    density_kg_m3, class_dry_density_kg_m3 : float arrays, shape (k,)
        Of the grains, and of a bed of each class alone.

    Returns
    -------
    porosity, dry_density : float arrays, shape (…)

    References
    ----------
    Colby, B. R. (1963). Discussion of "Sediment transportation mechanics: introduction and properties of
    sediment". Journal of the Hydraulics Division ASCE 89, 266-268.

    Examples
    --------
    Equal masses of loose mud and of sand:

    >>> _, density = volumes_add_up(np.array([0.5, 0.5]), np.array([2650.0, 2650.0]), np.array([400.0, 1600.0]))
    >>> float(density)
    640.0
    """
    density = 1.0 / weighted(1.0 / class_dry_density_kg_m3, fraction)
    return 1.0 - density * weighted(1.0 / density_kg_m3, fraction), density


def _given(fraction: Floats, density_kg_m3: Floats, given: Floats) -> tuple[Floats, Floats]:
    grains = 1.0 / weighted(1.0 / density_kg_m3, fraction)
    density = np.broadcast_to(given[:, None], grains.shape)
    full = (density >= grains).any(axis=1)
    if full.any():
        i = int(full.argmax())
        raise BedError(
            f"bed.layers[{i}].dry_density_kg_m3 = {given[i]:g} leaves no pores between grains of {grains[i].min():.0f} kg m-3"
        )
    return 1.0 - density / grains, density.copy()
