"""The page's section on further numbers: their maps, and how wrong they are."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.report.encode import Picture, picture
from texture.report.maps import Layer, draw_maps
from texture.report.table import Table, number

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["quantity_picture", "quantity_table"]

MOST_MAPS = 8  # on the page; texture.nc has them all


def quantity_picture(result: Result) -> Picture | None:
    """Draw the map of each quantity on a scale of its own; None where the recipe names none."""
    if not result.quantities:
        return None
    layers = []
    for found in result.quantities[:MOST_MAPS]:
        settings = found.model.settings
        low, high = (float(v) for v in np.nanquantile(found.mean, [0.01, 0.99]))
        limits = (low, high) if high > low else (low, low + 1.0)
        layers.append(Layer(settings.name.replace("_", " "), found.mean, label=settings.units, limits=limits))
    return picture(
        draw_maps(result.found.target, layers),
        "Expected mean of each cell, in the unit given; colours span all but the outer hundredths.",
        f"Maps of {', '.join(layer.title for layer in layers)}.",
    )


def quantity_table(result: Result) -> Table:
    """Held-out scores of every quantity and method, in its own unit."""
    rows = []
    mapped = {m.settings.name.replace("_", " "): m.mapper.name.replace("_", " ") for m in result.found.quantities}
    told = ", ".join(f"{name} by {method}" for name, method in mapped.items())
    for model in result.found.quantities:
        structure = model.mapper.structure[0]
        for method in model.methods:
            of_map = method is model.methods[0]
            scores = [f"{method.scores.get(key, np.nan):.3g}" for key in ("rmse", "mean_error")]
            scores += [number(method.scores.get(key, np.nan), 2) for key in ("r_squared", "coverage_90")]
            rows.append(
                [model.settings.name.replace("_", " "), model.settings.units, method.method.replace("_", " "),
                 f"{method.scores['n']:.0f}", *(s.replace("nan", "–").replace("-", "−") for s in scores),
                 number(structure.range_m / 1000, 1) if of_map and structure.structures else ""]
            )  # fmt: skip
    return Table(
        f"Further numbers, held out on the same folds and scored in their own unit. Mapped: {told}. Range: of the map's own fit.",
        ["number", "unit", "method", "stations", "RMSE", "mean error", "R²", "90 % cover", "range, km"],
        rows,
        numeric=[3, 4, 5, 6, 7, 8],
    )
