"""The whole bed from a map of parts: classes, layers, rim, smallest fractions, land; with its account."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from texture.bed.cells import Bools, Cells, Floats
from texture.bed.classes import ClassProperties, class_properties
from texture.bed.hiding import hiding_factor
from texture.bed.land import nearest_water
from texture.bed.layers import (
    close_classes,
    composition_in_classes,
    drop_small,
    layer_fractions,
    layer_stress,
    layer_thickness,
    to_classes,
)
from texture.bed.mixture import geometric_mean_diameter, mean_critical_stress, median_diameter
from texture.bed.mixture_packing import Packer, packer
from texture.bed.rim import blend, rim_weight
from texture.bed.roughness import skin_roughness_length
from texture.bed.water import Water
from texture.errors import BedError
from texture.recipe import Bed as BedSettings
from texture.recipe import Rim

__all__ = ["EVIDENCE", "Account", "Bed", "make_bed", "strength_known"]

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

CELLS_AT_ONCE = 100_000
"""Keeps what is between the steps within some tens of megabytes, whatever the size of the grid."""

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
        kg m-3 and without unit, by the rule that the recipe names as `bed.packing`.
    mixture_median_diameter, mixture_geometric_mean_diameter : float arrays, shape (layer, n)
        Metres.
    skin_roughness_length : float array, shape (n,)
        z0 = d50 / 12 of the first layer, metres: grain roughness, not total drag.
    critical_stress_for_erosion : float array, shape (layer, n), or None
        Mass-weighted mean of the classes' critical stresses, Pa; None when a class with mass in the bed has none.
    class_critical_stress : float array, shape (k, layer)
        Of each class alone in each layer, Pa; NaN where not known.
    hiding_exposure_factor : float array, shape (k, layer, n), or None
        What multiplies it in the mixture; None without a hiding correction.
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
    mixture_geometric_mean_diameter: Floats
    skin_roughness_length: Floats
    critical_stress_for_erosion: Floats | None
    class_critical_stress: Floats
    hiding_exposure_factor: Floats | None
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
    rim_start: Bools | None = None,
    rim_parent: Floats | None = None,
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
    rim_start : bool array, shape (n,), optional
        Cells that the file of `rim.sides` names, where it is a file.
    rim_parent : float array, shape (k, layer, n), optional
        Class fractions of the bed in `rim.parent`, where it is given; looked at in rim cells alone.

    Raises
    ------
    BedError
        If the map has holes in the water or does not sum to 1, a class makes no sense, or the rim does not
        fit on the grid.
    """
    n = cells.active.size
    _check_map(fractions, evidence, cells, len(parts))
    water = Water(settings.water.temperature_c, settings.water.salinity)
    classes = class_properties(settings.classes, water, parts)
    thickness = layer_thickness(settings.layers, cells.active, settings.land_thickness_m, settings.minimum_thickness_m)
    pack = packer(settings.packing, classes, settings.layers)
    weight = np.zeros(n) if rim is None else rim_weight(cells, rim, rim_start)
    rim_bed = _rim_bed(rim, classes, parts) if rim is not None and rim_parent is None else np.empty(0)

    fraction = np.empty((len(classes.names), len(settings.layers), n))
    mapped, rimmed, dropped, final = np.zeros((4, *fraction.shape[:2]))  # tonnes by class and layer
    for some in _blocks(np.flatnonzero(cells.active)):
        volume = cells.area_m2[some] * thickness[:, some]
        layers = layer_fractions(to_classes(fractions[some], classes), settings.layers, classes, parts)
        before = _tonnes(layers, classes, volume, pack)
        if rim is not None:
            layers = blend(
                layers, weight[some], rim_bed if rim_parent is None else _parent_bed(rim_parent, some, weight)
            )
        kept, small = drop_small(layers, settings.least_fraction)
        fraction[:, :, some] = kept
        mapped += before
        rimmed += _tonnes(layers, classes, volume, pack) if rim is not None else before
        dropped += _tonnes(layers, classes, volume, pack, of=small)
        final += _tonnes(kept, classes, volume, pack)
    land = np.flatnonzero(~cells.active)
    if settings.land_fill == "nearest":
        fraction[:, :, land] = fraction[:, :, nearest_water(cells)[land]]
    else:
        fraction[:, :, land] = composition_in_classes(settings.land_fill, classes, parts)[:, None, None]
    stress = layer_stress(settings.layers, classes)
    account = Account(
        tonnes=_named(classes, final.sum(axis=1)),
        rim_tonnes=_named(classes, (rimmed - mapped).sum(axis=1)),
        least_fraction_tonnes=_named(classes, dropped.sum(axis=1)),
        share_below_samples=float(final[:, 1:].sum() / final.sum()),
        rim_cells=int((weight > 0.0).sum()),
        land_cells=int(land.size),
        not_given=tuple(
            missing for missing in classes.not_given if missing not in _strong_in_all_layers(classes, stress)
        ),
    )
    return Bed(
        classes=classes,
        class_fraction=fraction,
        erodible_thickness=thickness,
        **_mixture(fraction, classes, thickness, settings, pack, stress, strength_known(settings, classes, rim)),
        class_critical_stress=stress,
        evidence=_flags(evidence, settings, cells, weight),
        rim_weight=weight,
        account=account,
    )


def strength_known(settings: BedSettings, classes: ClassProperties, rim: Rim | None = None) -> bool:
    """Tell whether every class that may have mass in the bed has a critical stress, so that the mixture has one."""
    unknown = np.isnan(layer_stress(settings.layers, classes)).any(axis=1)
    fills = [layer.fill for layer in settings.layers if layer.fill != "same"]
    fills += [] if settings.land_fill == "nearest" else [settings.land_fill]
    named = {name for fill in fills for name in fill} | set((rim and rim.classes) or {})
    has_mass = np.array(
        [share > 0.0 or name in named for name, share in zip(classes.names, classes.share, strict=True)]
    )
    return not (unknown & has_mass).any()


def _strong_in_all_layers(classes: ClassProperties, stress: Floats) -> set[str]:
    known: Bools = np.asarray(np.isfinite(stress).all(axis=1))
    return {f"{name}: critical stress" for name, good in zip(classes.names, known, strict=True) if good}


def _blocks(cells: NDArray[np.int64]) -> Iterator[NDArray[np.int64]]:
    """Cells in groups that bound the memory of what is between the steps."""
    for start in range(0, cells.size, CELLS_AT_ONCE):
        yield cells[start : start + CELLS_AT_ONCE]


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
    index = np.unravel_index(int(where.argmax()), cells.shape)
    words = ("cell",) if len(index) == 1 else ("row", "column")
    return ", ".join(f"{word} {i}" for word, i in zip(words, index, strict=True)) + " (from 0)"


def _parent_bed(parent: Floats, some: NDArray[np.int64], weight: Floats) -> Floats:
    """The parent's bed in some cells; 0 outside the rim, where it may not be known."""
    return np.where(weight[some] > 0.0, parent[:, :, some], 0.0)


def _rim_bed(rim: Rim, classes: ClassProperties, parts: Sequence[str]) -> Floats:
    if rim.parent is not None:
        raise BedError(f"rim.parent is a file ({rim.parent.name}); its bed has to be given as well")
    if rim.composition is not None:
        return composition_in_classes(rim.composition, classes, parts)
    given = rim.classes or {}
    return close_classes(np.array([given.get(name, 0.0) for name in classes.names]))


def _tonnes(
    fraction: Floats, classes: ClassProperties, area_thickness: Floats, pack: Packer, of: Floats | None = None
) -> Floats:
    """Mass by class and layer, shape (k, layer), of a bed or of the fractions `of` in it."""
    _, density = pack(fraction, median_diameter(fraction, classes.diameter_m))
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


def _mixture(
    fraction: Floats, classes: ClassProperties, thickness: Floats, settings: BedSettings, pack: Packer, stress: Floats,
    strong: bool,
) -> dict[str, Any]:  # fmt: skip
    """What follows from a bed's fractions, worked out in groups of cells."""
    content = np.empty_like(fraction)
    diameter, mean, pores, density = (np.empty(fraction.shape[1:]) for _ in range(4))
    mixed = np.empty(fraction.shape[1:]) if strong else None
    factor = None if settings.hiding == "none" else np.empty_like(fraction)
    for some in _blocks(np.arange(fraction.shape[2])):
        here = fraction[:, :, some]
        diameter[:, some] = median_diameter(here, classes.diameter_m)
        mean[:, some] = geometric_mean_diameter(here, classes.diameter_m)
        pores[:, some], density[:, some] = pack(here, diameter[:, some])
        content[:, :, some] = thickness[:, some] * density[:, some] * here
        strength = np.nan_to_num(stress)[:, :, None]  # unknown only in classes without mass, where it is not used
        if factor is not None:
            factor[:, :, some] = hiding_factor(here, classes.diameter_m, classes.loose)
            strength = strength * factor[:, :, some]
        if mixed is not None:
            mixed[:, some] = mean_critical_stress(here, strength)
    return {
        "class_mass_content": content,
        "dry_density": density,
        "porosity": pores,
        "mixture_median_diameter": diameter,
        "mixture_geometric_mean_diameter": mean,
        "skin_roughness_length": skin_roughness_length(diameter[0]),
        "critical_stress_for_erosion": mixed,
        "hiding_exposure_factor": factor,
    }
