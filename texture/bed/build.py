"""The whole bed from a map of parts: classes, layers, rim, smallest fractions, land; with its account."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from texture.bed.bed import Account, Bed, in_blocks
from texture.bed.cells import Bools, Cells, Floats
from texture.bed.classes import ClassProperties, class_properties
from texture.bed.cores import CoreLayer, moved_fractions
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
from texture.bed.mixture import median_diameter
from texture.bed.mixture_packing import Packer, packer, repacked
from texture.bed.rim import blend, rim_weight
from texture.bed.water import Water
from texture.errors import BedError
from texture.recipe import Bed as BedSettings
from texture.recipe import Rim

__all__ = ["make_bed", "strength_known"]

Flags = NDArray[np.int8]

SUM_TOLERANCE = 1e-6
"""Sums of the map's parts further from 1 than this are a mistake upstream, not rounding."""

SAMPLED, SAME, RIM, LAND, GIVEN = 1, 2, 3, 4, 5


def make_bed(
    fractions: Floats,
    evidence: NDArray[np.integer],
    cells: Cells,
    settings: BedSettings,
    rim: Rim | None = None,
    parts: Sequence[str] = ("mud", "sand", "gravel"),
    weight: Floats | None = None,
    rim_parent: Floats | None = None,
    porosity: Callable[[Floats], Floats] | None = None,
    hard_ground: Floats | None = None,
    cores: Mapping[int, CoreLayer] | None = None,
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
    weight : float array, shape (n,), optional
        Of the rim, as `rim_weight` gives it; worked out here from its sides where it is not given.
    rim_parent : float array, shape (k, layer, n), optional
        Class fractions of the bed in `rim.parent`, where it is given; looked at in rim cells alone.
    porosity : callable, optional
        From the porosity that the packing gives (layer, …) to the bed's; dry density and mass follow.
    hard_ground : float array, shape (n,), optional
        Probability that the ground is hard; from the recipe's threshold on nothing but the least thickness can erode.
    cores : mapping of layer from 0 to CoreLayer, optional
        How the layers that are filled from cores differ from the map.

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
    hard = (
        np.zeros(n, dtype=bool)
        if hard_ground is None
        else cells.active & (hard_ground >= settings.hard_ground_threshold)
    )
    thickness[:, hard] = settings.minimum_thickness_m
    pack = packer(settings.packing, classes, settings.layers)
    if porosity is not None:
        pack = repacked(pack, porosity)
    if rim is None:
        weight = np.zeros(n)
    elif weight is None:
        weight = rim_weight(cells, rim)
    rim_bed = _rim_bed(rim, classes, parts) if rim is not None and rim_parent is None else np.empty(0)

    fraction = np.empty((len(classes.names), len(settings.layers), n))
    mapped, rimmed, dropped, final, sampled = np.zeros((5, *fraction.shape[:2]))  # tonnes by class and layer
    below = _cores_of(settings, cores)
    wet = np.flatnonzero(cells.active)
    for block in in_blocks(wet.size):
        some = wet[block]
        volume = cells.area_m2[some] * thickness[:, some]
        from_cores = {
            i: to_classes(moved_fractions(fractions[some], core.shift[some], core.logratio), classes)
            for i, core in below.items()
        }
        layers = layer_fractions(to_classes(fractions[some], classes), settings.layers, classes, parts, from_cores)
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
        if below:
            reached = np.array([below[i].sampled[some] if i in below else some < 0 for i in range(len(volume))])
            sampled += _tonnes(kept, classes, volume * reached, pack)
    land = np.flatnonzero(~cells.active)
    if settings.land_fill == "nearest":
        source = nearest_water(cells)
        for block in in_blocks(land.size):
            fraction[:, :, land[block]] = fraction[:, :, source[land[block]]]
    else:
        fraction[:, :, land] = composition_in_classes(settings.land_fill, classes, parts)[:, None, None]
    stress = layer_stress(settings.layers, classes)
    account = Account(
        tonnes=_named(classes, final.sum(axis=1)),
        rim_tonnes=_named(classes, (rimmed - mapped).sum(axis=1)),
        least_fraction_tonnes=_named(classes, dropped.sum(axis=1)),
        share_below_samples=float((final - sampled)[:, 1:].sum() / final.sum())
        if final.any()
        else 0.0,  # all of it may be hard ground
        rim_cells=int((weight > 0.0).sum()),
        land_cells=int(land.size),
        hard_cells=int(hard.sum()),
        not_given=tuple(
            missing for missing in classes.not_given if missing not in _strong_in_all_layers(classes, stress)
        ),
    )
    return Bed(
        hard_ground_probability=hard_ground,
        classes=classes,
        class_fraction=fraction,
        erodible_thickness=thickness,
        class_critical_stress=stress,
        evidence=_flags(evidence, settings, cells, weight, below),
        rim_weight=weight,
        pack=pack,
        hidden=settings.hiding != "none",
        strong=strength_known(settings, classes, rim),
        account=account,
    )


def strength_known(settings: BedSettings, classes: ClassProperties, rim: Rim | None = None) -> bool:
    """Tell whether every class that may have mass in the bed has a critical stress, so that the mixture has one."""
    unknown = np.isnan(layer_stress(settings.layers, classes)).any(axis=1)
    fills = [layer.fill for layer in settings.layers if isinstance(layer.fill, dict)]
    fills += [] if settings.land_fill == "nearest" else [settings.land_fill]
    named = {name for fill in fills for name in fill} | set((rim and rim.classes) or {})
    has_mass = np.array(
        [share > 0.0 or name in named for name, share in zip(classes.names, classes.share, strict=True)]
    )
    return not (unknown & has_mass).any()


def _strong_in_all_layers(classes: ClassProperties, stress: Floats) -> set[str]:
    known: Bools = np.asarray(np.isfinite(stress).all(axis=1))
    return {f"{name}: critical stress" for name, good in zip(classes.names, known, strict=True) if good}


def _check_map(fractions: Floats, evidence: NDArray[np.integer], cells: Cells, n_parts: int) -> None:
    n = cells.active.size
    if fractions.shape != (n, n_parts) or evidence.shape != (n,):
        raise BedError(
            f"fractions {fractions.shape} and evidence {evidence.shape}, expected ({n}, {n_parts}) and ({n},)"
        )
    holes, wrong = np.zeros(n, dtype=bool), np.zeros(n, dtype=bool)
    for some in in_blocks(n):
        here, wet = fractions[some], cells.active[some]
        holes[some] = wet & ~np.isfinite(here).all(axis=1)
        off = np.abs(here.sum(axis=1) - 1.0) > SUM_TOLERANCE
        wrong[some] = wet & (off | (here < 0.0).any(axis=1))
    if holes.any():
        raise BedError(
            f"{int(holes.sum())} water cells of {cells.name} have no fractions, the first is {_place(cells, holes)}; "
            "a model's bed cannot have holes"
        )
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


def _cores_of(settings: BedSettings, cores: Mapping[int, CoreLayer] | None) -> dict[int, CoreLayer]:
    """Layers that are filled from cores, by their number from 0."""
    asked = [i for i, layer in enumerate(settings.layers) if layer.fill == "cores"]
    for i in asked:
        if cores is None or i not in cores:
            raise BedError(f'bed.layers[{i}].fill = "cores": what the cores found has to be given as well')
    return {i: (cores or {})[i] for i in asked}


def _flags(
    evidence: NDArray[np.integer],
    settings: BedSettings,
    cells: Cells,
    weight: Floats,
    below: Mapping[int, CoreLayer],
) -> Flags:
    flags = np.empty((len(settings.layers), evidence.size), dtype=np.int8)
    flags[0] = evidence
    for i, layer in enumerate(settings.layers[1:], start=1):
        flags[i] = SAME if layer.fill == "same" else GIVEN
        if i in below:
            flags[i] = np.where(below[i].sampled, SAMPLED, SAME)
    flags[:, weight > 0.0] = RIM
    flags[:, ~cells.active] = LAND
    return flags
