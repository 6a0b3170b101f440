"""The box "defaults you did not choose": settings that nobody set, with what each of them did in this run."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np

from texture.recipe.settings import Settings
from texture.report.table import Table, number

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["defaults_table"]


def defaults_table(result: Result) -> Table:
    """Settings that the recipe left out: value, what it did here, and what it means; those that did something first."""
    from texture.recipe.unset import left_to_default

    rows: list[list[str]] = []
    plain: list[list[str]] = []
    for unset in left_to_default(result.found.recipe):
        effect = EFFECTS[unset.key](result) if unset.key in EFFECTS else ""
        row = [unset.key, _shown(unset.value), effect or "–", unset.description]
        (rows if effect else plain).append(row)
    return Table(
        "Every setting that the recipe leaves to its default. They are choices all the same, only not yours yet.",
        ["setting", "value", "what it did here", "what it means"],
        rows + plain,
        lead=len(rows),
    )


def _shown(value: Any) -> str:
    """Write a default the way a recipe would, lists of blocks as their number."""
    if value is None:
        return "not set"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, tuple):
        if any(isinstance(item, Settings) for item in value):
            return f"{len(value)} block{'s' * (len(value) != 1)}"
        return "[" + ", ".join(_shown(item) for item in value) + "]" if value else "none"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{k} = {_shown(v)}" for k, v in value.items()) + " }" if value else "none"
    return str(value) or "empty"


def _reasons(result: Result, words: str) -> int:
    return int(result.found.stations.set_aside["reason"].astype(str).str.contains(words, regex=False).sum())


def _rules(result: Result, words: str) -> int:
    return int(result.found.stations.audit["rule"].astype(str).str.contains(words, regex=False).sum())


def _sum_tolerance(result: Result) -> str:
    return f"{_reasons(result, 'parts sum to')} rows set aside for their sum"


def _surface(result: Result) -> str:
    return f"{len(result.found.stations.deeper)} intervals of cores lie deeper or reach below it"


def _on_land(result: Result) -> str:
    moved, dropped = _rules(result, "on land: moved"), _reasons(result, "on land")
    return f"{moved} values of positions moved to water, {dropped} stations set aside on land"


def _limit(result: Result) -> str:
    found = result.found
    below = (found.observations.fractions < found.recipe.composition.detection_limit).sum(axis=0)
    known = np.isfinite(found.observations.fractions).sum(axis=0)
    shares = zip(found.recipe.composition.parts, below, known, strict=True)
    return "stations below it: " + ", ".join(f"{part} {b} of {k}" for part, b, k in shares)


def _zeros(result: Result) -> str:
    tried = result.found.validation.tried
    return f"{result.found.mapper.treatment.label}, " + (
        f"the best of {len(tried)} by held-out error" if len(tried) > 1 else "the only one"
    )


def _tree(result: Result) -> str:
    return "coordinates " + ", ".join(result.found.mapper.column_names)


def _structure(result: Result) -> str:
    fits = zip(result.found.mapper.column_names, result.found.mapper.structure, strict=True)
    return "; ".join(f"{name}: {fit.fit_record.chosen}" for name, fit in fits if fit.fit_record is not None)


def _neighbours(result: Result) -> str:
    return str(result.look.honesty) if result.look is not None else ""


def _points(result: Result) -> str:
    return f"{result.points_per_side**2} in every cell"


def _inlets(result: Result) -> str:
    openings = result.found.target.openings
    inlets = sum(o.inlet for o in openings)
    return (
        f"openings of the outer edge: {len(openings) - inlets} taken for sea, {inlets} for river inlets"
        if openings
        else ""
    )


def _folds(result: Result) -> str:
    folds = result.found.validation.folds
    if not np.isfinite(folds.wasserstein):
        return ""
    return (
        f"distances off those of the map by {folds.wasserstein:,.0f} m (random folds {folds.wasserstein_random:,.0f} m)"
    )


def _least_fraction(result: Result) -> str:
    moved = sum(abs(t) for t in result.bed.account.least_fraction_tonnes.values()) / 2.0
    return f"{number(moved / 1e6, 3)} million tonnes changed class"


def _layers(result: Result) -> str:
    thickness = sum(layer.thickness_m for layer in result.found.recipe.bed.layers)
    return f"the bed is {thickness:g} m thick and has nothing below: a storm may cut through it"


def _classes(result: Result) -> str:
    c = result.bed.classes
    sizes = ", ".join(f"{name} {d * 1e6:,.0f} µm" for name, d in zip(c.names, c.diameter_m, strict=True))
    return f"one class a part, with diameters that stand in for yours: {sizes}"


def _packing(result: Result) -> str:
    density = result.bed.dry_density[:, result.found.target.active]
    return f"dry density from {density.min():,.0f} to {density.max():,.0f} kg m⁻³"


def _hiding(result: Result) -> str:
    return (
        "critical stress in the mixture is that of each class alone"
        if result.bed.hiding_exposure_factor is None
        else ""
    )


def _rim(result: Result) -> str:
    return "" if result.bed.account.rim_cells else "no rim: the open boundary has the estimate itself"


def _basis(result: Result) -> str:
    blocks = result.found.recipe.samples
    count = sum("basis" not in block.model_fields_set for block in blocks)
    return f"{count} of {len(blocks)} files taken so: where the laboratory saw no gravel, that is read as none"


def _credit(result: Result) -> str:
    count = sum(block.credit is None for block in result.found.recipe.samples)
    return f"nobody is named for {count} of {len(result.found.recipe.samples)} files"


EFFECTS: dict[str, Callable[[Any], str]] = {
    "samples.basis": _basis,
    "samples.credit": _credit,
    "intake.sum_tolerance": _sum_tolerance,
    "intake.surface_m": _surface,
    "intake.on_land": _on_land,
    "composition.tree": _tree,
    "composition.zeros": _zeros,
    "composition.detection_limit": _limit,
    "target.points_per_cell": _points,
    "target.inlet_width_m": _inlets,
    "method.neighbours": _neighbours,
    "method.fit": _structure,
    "validation.folds": _folds,
    "bed.least_fraction": _least_fraction,
    "bed.layers": _layers,
    "bed.classes": _classes,
    "bed.packing": _packing,
    "bed.hiding": _hiding,
    "rim": _rim,
}
"""Key → what its default did. A key without an entry here is listed with its meaning alone."""
