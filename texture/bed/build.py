"""The whole bed from a map of parts: classes, layers, rim, smallest fractions, land; with its account."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from texture.bed.cells import Cells, Floats
from texture.bed.classes import ClassProperties, class_properties
from texture.bed.land import nearest_water
from texture.bed.layers import (
    close_classes,
    composition_in_classes,
    drop_small,
    layer_fractions,
    layer_thickness,
    to_classes,
)
from texture.bed.mixture import mean_critical_stress, median_diameter, mixture_packing
from texture.bed.rim import blend, rim_weight
from texture.bed.roughness import skin_roughness_length
from texture.bed.water import Water
from texture.errors import BedError
from texture.recipe import Bed as BedSettings
from texture.recipe import Rim

__all__ = ["EVIDENCE", "Account", "Bed", "make_bed"]

Flags = NDArray[np.int8]

EVIDENCE = {
    0: "not in the map",
    1: "supported by samples",
    2: "extrapolated",
    3: "rim",
    4: "filled under land",
    5: "given by the user",
    6: "wider fall-back",
}
"""Where a cell's bed comes from."""

SUM_TOLERANCE = 1e-6
"""Sums of the map's parts further from 1 than this are a mistake upstream, not rounding."""

RIM, LAND, SAME, GIVEN = 3, 4, 2, 5


@dataclass(frozen=True)
class Account:
    """What the bed's making did to its mass, for the printed summary.

    Attributes
    ----------
    tonnes : dict
        Dry mass of each class in water cells, all layers.
    rim_tonnes : dict
        What the rim put in (positive) or took out (negative) of each class.
    least_fraction_tonnes : dict
        What `least_fraction` took out of each class.
    share_below_samples : float
        Share of the bed's mass in layers below the first, where no sample was taken.
    rim_cells, land_cells : int
        Cells touched by the rim, and land cells that were filled.
    not_given : tuple of str
        Properties that the model will have to be told by hand.
    """

    tonnes: dict[str, float]
    rim_tonnes: dict[str, float]
    least_fraction_tonnes: dict[str, float]
    share_below_samples: float
    rim_cells: int
    land_cells: int
    not_given: tuple[str, ...]


@dataclass(frozen=True, eq=False, repr=False)
class Bed:
    """A model's starting bed on n cells, land included; nothing is NaN.

    Attributes
    ----------
    classes : ClassProperties
    class_fraction : float array, shape (k, layer, n)
        Of dry mass; sums to 1 along the first axis within 1e-12.
    erodible_thickness : float array, shape (layer, n)
        Metres.
    class_mass_content : float array, shape (k, layer, n)
        Thickness × dry density × fraction, kg m-2.
    dry_density, porosity : float arrays, shape (layer, n)
        kg m-3 and without unit; porosity by Wu & Wang (2006) from the mixture's median diameter.
    mixture_median_diameter : float array, shape (layer, n)
        Metres.
    skin_roughness_length : float array, shape (n,)
        z0 = d50 / 12 of the first layer, metres: grain roughness, not total drag.
    critical_stress_for_erosion : float array, shape (layer, n), or None
        Mass-weighted mean of the classes' critical stresses, Pa; None when a class has none.
    evidence : int8 array, shape (layer, n)
        Keys of `EVIDENCE`. Lower layers filled "same" are extrapolated (2), compositions are given by the
        user (5); the rim (3) and land (4) go before both.
    rim_weight : float array, shape (n,)
        1 where the bed is the rim's own, 0 outside the rim.
    account : Account
    """

    classes: ClassProperties
    class_fraction: Floats
    erodible_thickness: Floats
    class_mass_content: Floats
    dry_density: Floats
    porosity: Floats
    mixture_median_diameter: Floats
    skin_roughness_length: Floats
    critical_stress_for_erosion: Floats | None
    evidence: Flags
    rim_weight: Floats
    account: Account = field(hash=False)

    def __repr__(self) -> str:
        k, layers, n = self.class_fraction.shape
        total = sum(self.account.tonnes.values())
        return f"<Bed: {k} classes, {layers} layers, {n:,} cells, {total:,.0f} t in water>"


def make_bed(
    fractions: Floats,
    evidence: NDArray[np.integer],
    cells: Cells,
    settings: BedSettings,
    rim: Rim | None = None,
    parts: Sequence[str] = ("mud", "sand", "gravel"),
) -> Bed:
    """Make the bed: classes, layers, then the rim, then the smallest fractions, then land.

    Parameters
    ----------
    fractions : float array, shape (n, n_parts)
        The map, in the order of `parts`; land cells may be NaN.
    evidence : int array, shape (n,)
        Of the map, keys of `EVIDENCE`.
    cells : Cells
        The target.
    settings : texture.recipe.Bed
    rim : texture.recipe.Rim, optional
        Without it, no rim.
    parts : sequence of str

    Raises
    ------
    BedError
        If the map has holes in the water or does not sum to 1, a class makes no sense, or the rim does not
        fit on the grid.
    """
    n = cells.active.size
    _check_map(fractions, evidence, cells, len(parts))
    wet = np.flatnonzero(cells.active)
    water = Water(settings.water.temperature_c, settings.water.salinity)
    classes = class_properties(settings.classes, water, parts)
    thickness = layer_thickness(settings.layers, cells.active, settings.land_thickness_m)
    mapped = layer_fractions(to_classes(fractions[wet], classes), settings.layers, classes, parts)
    weight = np.zeros(n) if rim is None else rim_weight(cells, rim)
    rimmed = mapped if rim is None else close_classes(blend(mapped, weight[wet], _rim_bed(rim, classes, parts)))
    final, dropped = drop_small(rimmed, settings.least_fraction)

    area_thickness = cells.area_m2[wet] * thickness[:, wet]
    before, after = _tonnes(mapped, classes, area_thickness), _tonnes(rimmed, classes, area_thickness)
    lost = _tonnes(rimmed, classes, area_thickness, of=dropped)
    mass = _tonnes(final, classes, area_thickness)

    source = nearest_water(cells)
    position = np.full(n, -1, dtype=np.int64)
    position[wet] = np.arange(wet.size)
    return _assemble(
        final[:, :, position[source]],
        classes,
        thickness,
        _flags(evidence, settings, cells, weight),
        weight,
        Account(
            tonnes=_named(classes, mass.sum(axis=1)),
            rim_tonnes=_named(classes, (after - before).sum(axis=1)),
            least_fraction_tonnes=_named(classes, lost.sum(axis=1)),
            share_below_samples=float(mass[:, 1:].sum() / mass.sum()),
            rim_cells=int((weight > 0.0).sum()),
            land_cells=int(n - wet.size),
            not_given=classes.not_given,
        ),
    )


def _check_map(fractions: Floats, evidence: NDArray[np.integer], cells: Cells, n_parts: int) -> None:
    n = cells.active.size
    if fractions.shape != (n, n_parts) or evidence.shape != (n,):
        raise BedError(
            f"fractions {fractions.shape} and evidence {evidence.shape}, expected ({n}, {n_parts}) and ({n},)"
        )
    holes = cells.active & ~np.isfinite(fractions).all(axis=1)
    if holes.any():
        raise BedError(
            f"{int(holes.sum())} water cells of {cells.name} have no fractions, the first is {_place(cells, holes)}; "
            "a model's bed cannot have holes"
        )
    off = np.abs(fractions.sum(axis=1) - 1.0) > SUM_TOLERANCE
    wrong = cells.active & (off | (fractions < 0.0).any(axis=1))
    if wrong.any():
        raise BedError(
            f"{int(wrong.sum())} water cells of {cells.name} have fractions below 0 or not summing to 1, the first is "
            f"{_place(cells, wrong)}: {fractions[wrong][0].tolist()}"
        )


def _place(cells: Cells, where: NDArray[np.bool_]) -> str:
    row, column = divmod(int(where.argmax()), cells.shape[1])
    return f"row {row}, column {column} (from 0)"


def _rim_bed(rim: Rim, classes: ClassProperties, parts: Sequence[str]) -> Floats:
    if rim.composition is not None:
        return composition_in_classes(rim.composition, classes, parts)
    given = rim.classes or {}
    return close_classes(np.array([given.get(name, 0.0) for name in classes.names]))


def _tonnes(fraction: Floats, classes: ClassProperties, area_thickness: Floats, of: Floats | None = None) -> Floats:
    """Mass by class and layer, shape (k, layer), of a bed or of the fractions `of` in it."""
    _, density = mixture_packing(fraction, classes.density_kg_m3, median_diameter(fraction, classes.diameter_m))
    shares = fraction if of is None else of
    return np.asarray(np.einsum("kln,ln->kl", shares, density * area_thickness) / 1000.0)


def _named(classes: ClassProperties, values: Floats) -> dict[str, float]:
    return dict(zip(classes.names, values.tolist(), strict=True))


def _flags(evidence: NDArray[np.integer], settings: BedSettings, cells: Cells, weight: Floats) -> Flags:
    flags = np.empty((len(settings.layers), evidence.size), dtype=np.int8)
    flags[0] = evidence
    for i, layer in enumerate(settings.layers[1:], start=1):
        flags[i] = SAME if layer.fill == "same" else GIVEN
    flags[:, weight > 0.0] = RIM
    flags[:, ~cells.active] = LAND
    return flags


def _assemble(
    fraction: Floats, classes: ClassProperties, thickness: Floats, flags: Flags, weight: Floats, account: Account
) -> Bed:
    diameter = median_diameter(fraction, classes.diameter_m)
    pores, density = mixture_packing(fraction, classes.density_kg_m3, diameter)
    return Bed(
        classes=classes,
        class_fraction=fraction,
        erodible_thickness=thickness,
        class_mass_content=thickness * density * fraction,
        dry_density=density,
        porosity=pores,
        mixture_median_diameter=diameter,
        skin_roughness_length=skin_roughness_length(diameter[0]),
        critical_stress_for_erosion=mean_critical_stress(fraction, classes.critical_stress_pa),
        evidence=flags,
        rim_weight=weight,
        account=account,
    )
