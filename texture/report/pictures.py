"""Every figure of a result: drawn once for the page, and one by one for papers."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.report import error_pictures
from texture.report.encode import Picture, picture
from texture.report.maps import EVIDENCE_COLOURS, Layer, draw_maps
from texture.report.members import members_picture
from texture.report.quantities import quantity_picture
from texture.report.triangle import draw_triangles

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from texture.result import Result, Validated

__all__ = ["page_pictures", "result_picture", "write_error_figures", "write_figures"]

Floats = NDArray[np.float64]
PAPER_WIDTH = 5.5  # inches, 140 mm: between one and two columns of most journals (common practice, no source)
PAPER_DPI = 300


def result_picture(result: Result) -> Picture:
    """Draw the map itself: the parts and the most probable class, for the page, a README or a slide."""
    layers = [*_part_layers(result), _class_layer(result)]
    rings = "" if error_pictures.station_places(result.found) is None else " Rings: stations."
    return picture(
        draw_maps(result.found.target, layers, error_pictures.station_places(result.found)),
        "Expected fractions of dry mass in each water cell, and the most probable texture class (Folk 1954)." + rings,
        "Four maps: mud, sand and gravel fraction, and texture class"
        + (", with the stations on them." if rings else "."),
    )


def page_pictures(result: Result) -> dict[str, Picture]:
    """Draw the other figures of the page; no `residuals` where positions are hidden."""
    found = result.found
    pictures = {
        "trust": picture(
            draw_maps(found.target, [*_interval_layers(result), _evidence_layer(result)]),
            "How uncertain the mean of each cell is, and which cells lie beyond what the samples support.",
            "Maps of interval width and of evidence.",
        ),
        "bed": picture(
            draw_maps(found.target, _bed_layers(result)),
            "The bed as the model gets it, with the rim along the open boundary.",
            "Maps of the rim's weight and of the median diameter.",
        ),
        "scatter": picture(
            error_pictures.scatter(found),
            "Each dot is a station, measured against what was predicted while it was held out. On the line they agree.",
            "Scatter of measured against held-out fractions, one panel for each part.",
        ),
        "variograms": picture(
            error_pictures.variograms(found),
            "Variogram of each coordinate: points from the samples, both fits as lines, dotted lines down at their ranges.",
            "Empirical variogram points and two fitted curves with their ranges for each log-ratio coordinate.",
        ),
        "triangle": picture(
            _triangles(result),
            "Left the samples, right the cells of the map. The map is drawn in: means of cells are less extreme than samples.",
            "Two triangles of mud, sand and gravel: samples as dots, the map as shares of its area.",
        ),
    }
    numbers = quantity_picture(result)
    if numbers is not None:
        pictures["quantities"] = numbers
    if result.found.validation.judged.factors is not None:
        pictures["calibration"] = picture(
            error_pictures.calibration(found),
            "Are the intervals honest? Share of held-out samples below each predicted quantile; on the line they are. Grey as fitted, "
            "dark after calibration, by factors that were learned without the samples that they meet.",
            "Calibration curves, one panel for each part.",
        )
    pictures["pit"] = picture(
        error_pictures.pit(found),
        "Where held-out samples lie in what was predicted for them, after calibration: a tenth of them in each bar where intervals are "
        "honest (line). A hump: too wide; a bowl: too narrow; a slope: biased.",
        "Histograms of the probability integral transform, one panel for each part.",
    )
    if result.members is not None:
        pictures["members"] = members_picture(result)
    if error_pictures.station_places(result.found) is not None:
        pictures["residuals"] = picture(
            error_pictures.residuals(found),
            "Where the map was wrong: prediction minus measurement of each station while it was held out. Patches of one "
            "colour are errors that neighbours share.",
            "Maps of held-out error, one for each part, stations coloured from too little to too much.",
        )
    return pictures


def write_figures(result: Result, folder: Path) -> None:
    """Write each map and diagnostic as PNG (300 dots an inch) and PDF into a folder, which is made.

    Neither holds a date, so that the same result gives the same bytes.
    """
    _save(_paper_figures(result), folder)


def write_error_figures(found: Validated, folder: Path) -> None:
    """Write the figures of cross-validation alone, as `write_figures` does those of a build."""
    _save(error_pictures.error_figures(found), folder)


def _save(figures: Iterable[tuple[str, Figure]], folder: Path) -> None:
    folder.mkdir()
    for name, figure in figures:
        figure.savefig(folder / f"{name}.png", dpi=PAPER_DPI, facecolor="white", metadata={"Software": None})
        figure.savefig(
            folder / f"{name}.pdf", dpi=PAPER_DPI, metadata={"CreationDate": None, "Producer": None, "Creator": None}
        )


def _paper_figures(result: Result) -> Iterator[tuple[str, Figure]]:
    target, place = result.found.target, error_pictures.station_places(result.found)
    parts = result.found.recipe.composition.parts
    named = [
        *((f"{part}_fraction", layer) for part, layer in zip(parts, _part_layers(result), strict=True)),
        ("texture_class", _class_layer(result)),
        *((f"{part}_interval", layer) for part, layer in zip(parts, _interval_layers(result), strict=False)),
        ("evidence", _evidence_layer(result)),
        *zip(("rim", "median_diameter"), _bed_layers(result), strict=True),
    ]
    for name, layer in named:
        rings = place if name in {*(f"{part}_fraction" for part in parts), "texture_class"} else None
        yield name, draw_maps(target, [layer], rings, columns=1, width=PAPER_WIDTH)
    yield "triangle", _triangles(result)
    yield from error_pictures.error_figures(result.found)


def _part_layers(result: Result) -> list[Layer]:
    parts = result.found.recipe.composition.parts
    return [Layer(f"{part} fraction", result.estimate.fractions[:, i]) for i, part in enumerate(parts)]


def _interval_layers(result: Result) -> list[Layer]:
    """Width of the 90 % interval of each part; none for methods without a variance."""
    if not result.found.mapper.has_variance:
        return []
    layers, quantiles = [], result.estimate.quantiles
    for i, part in enumerate(result.found.recipe.composition.parts):
        width = quantiles[2, :, i] - quantiles[0, :, i]
        limits = (0.0, max(0.2, float(np.nanmax(width))))
        layers.append(Layer(f"width of the 90 % interval, {part}", width, limits=limits))
    return layers


def _evidence_layer(result: Result) -> Layer:
    from texture.bed import EVIDENCE

    evidence = np.where(result.found.target.active, result.estimate.evidence.astype(float), np.nan)
    return Layer("evidence", evidence, names=EVIDENCE, colours=EVIDENCE_COLOURS)


def _class_layer(result: Result) -> Layer:
    from texture.composition import find_scheme
    from texture.output import class_colours

    scheme = find_scheme("folk")
    values = np.where(result.estimate.texture_class > 0, result.estimate.texture_class.astype(float), np.nan)
    names = dict(zip(scheme.numbers, scheme.words, strict=True))
    return Layer("most probable texture class", values, names=names, colours=class_colours(scheme))


def _bed_layers(result: Result) -> list[Layer]:
    active, bed = result.found.target.active, result.bed
    diameter = np.log10(np.where(active, bed.surface_median_diameter * 1e6, np.nan))
    low, high = float(np.nanmin(diameter)), float(np.nanmax(diameter))
    return [
        Layer("rim weight", np.where(active, bed.rim_weight, np.nan), label="share of the rim's own bed"),
        Layer("median diameter of the first layer", diameter, label="log10 of µm", limits=(low, max(high, low + 1e-6))),
    ]


def _triangles(result: Result) -> Figure:
    found = result.found
    wet = found.target.active
    area = found.target.area_m2[wet]
    return draw_triangles(
        found.recipe.composition.parts, found.observations.fractions, result.estimate.fractions[wet], area
    )
