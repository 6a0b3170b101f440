"""The one offline page: figures, tables and text of a result in a self-contained HTML file."""

from __future__ import annotations

from importlib import resources
from typing import TYPE_CHECKING

import numpy as np

from texture.output.members_nc import NOT_A_BED
from texture.report.charts import draw_scatter, draw_variograms
from texture.report.encode import Picture, picture
from texture.report.explorer import explorer
from texture.report.maps import EVIDENCE_COLOURS, Layer, draw_maps
from texture.report.members import members_picture
from texture.report.quantities import quantity_picture, quantity_table
from texture.report.tables import page_tables
from texture.space import own_ranges, space_line

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["CAUTIONS", "result_picture", "versions_line", "write_page"]

CAUTIONS = (
    "The bed shown is smoother than any real bed: it is an expected mean of each cell, not a possible bed.",
    "Grabs under-sample rock and gravel and lose fines on the way up; gravel shares from small grabs are rough.",
    "Settling, erosion and strength of mud are not in grain size: the numbers that stand for them were given, not mapped.",
    "The rim along the open boundary is numerical, not observed.",
    "Below the depth of the samples the bed is a guess; its share of the mass is stated above.",
    "Not for navigation, foundations or permits. Local data and licensed practice come first.",
)


def write_page(result: Result, map_picture: Picture, settings: str, versions: str) -> str:
    """Return the page as HTML text; every value that came from outside is escaped.

    Parameters
    ----------
    result : Result
    map_picture : Picture
        As `result_picture` draws it.
    settings : str
        The resolved recipe, shown as it is.
    versions : str
        One line of versions and seconds.
    """
    import jinja2

    template = resources.files("texture.report").joinpath("template.html").read_text(encoding="utf-8")
    environment = jinja2.Environment(autoescape=True, undefined=jinja2.StrictUndefined, trim_blocks=True)
    found = result.found
    return environment.from_string(template).render(
        title=found.recipe.title,
        method_line=_method_line(result),
        answer=result.answer(),
        explorer=explorer(result),
        figures={"parts": map_picture, **_figures(result), "quantities": quantity_picture(result)},
        tables={**page_tables(result), "quantities": quantity_table(result)},
        map_notes=_map_notes(result),
        notes=found.stations.notes,
        folds_line=_folds_line(result),
        error_notes=_error_notes(result),
        opinion_line=_opinion_line(result),
        place_line=_place_line(result),
        bed_notes=_bed_notes(result),
        settings=settings,
        versions=versions,
        cautions=CAUTIONS,
        not_a_bed=NOT_A_BED,
    )


def versions_line(result: Result) -> str:
    """Say versions and seconds in one line."""
    from importlib import metadata

    from texture import __version__

    packages = ", ".join(
        f"{name} {metadata.version(name)}" for name in ("numpy", "scipy", "numba", "pyproj", "rasterio")
    )
    seconds = ", ".join(f"{name} {value:.1f} s" for name, value in result.clock.seconds.items())
    return f"Seabed Texture {__version__}; {packages}. {seconds}."


def _figures(result: Result) -> dict[str, Picture]:
    found, parts = result.found, result.found.recipe.composition.parts
    figures = {
        "trust": _trust_picture(result),
        "bed": _bed_picture(result),
        "scatter": picture(
            draw_scatter(parts, found.observations.fractions, found.validation.chosen),
            "Each dot is a station, measured against what was predicted while it was held out.",
            "Scatter of measured against held-out fractions, one panel for each part.",
        ),
        "variograms": picture(
            draw_variograms(found.mapper.structure, found.mapper.column_names),
            "Variogram of each coordinate: points from the samples, lines as fitted.",
            "Empirical variogram points and fitted curves for each log-ratio coordinate.",
        ),
    }
    if result.members is not None:
        figures["members"] = members_picture(result)
    return figures


def result_picture(result: Result) -> Picture:
    """Draw the map itself: the parts and the most probable class, for the page, a README or a slide."""
    found, estimate = result.found, result.estimate
    table = found.stations.table
    place = table["longitude"].to_numpy(), table["latitude"].to_numpy()
    layers = [
        Layer(f"{part} fraction", estimate.fractions[:, i]) for i, part in enumerate(found.recipe.composition.parts)
    ]
    layers.append(_class_layer(result))
    return picture(
        draw_maps(found.target, layers, place),
        "Expected fractions of dry mass in each water cell, and the most probable texture class (Folk 1954). Rings: stations.",
        "Four maps: mud, sand and gravel fraction, and texture class, with the stations on them.",
    )


def _trust_picture(result: Result) -> Picture:
    from texture.bed import EVIDENCE

    found, estimate = result.found, result.estimate
    layers = []
    if found.mapper.has_variance:
        for column, part in enumerate(found.recipe.composition.parts):
            width = estimate.quantiles[2, :, column] - estimate.quantiles[0, :, column]
            layers.append(
                Layer(f"width of the 90 % interval, {part}", width, limits=(0.0, max(0.2, float(np.nanmax(width)))))
            )
    evidence = np.where(found.target.active, estimate.evidence.astype(float), np.nan)
    layers.append(Layer("evidence", evidence, names=EVIDENCE, colours=EVIDENCE_COLOURS))
    return picture(
        draw_maps(found.target, layers),
        "How uncertain the mean of each cell is, and which cells lie beyond what the samples support.",
        "Maps of interval width and of evidence.",
    )


def _bed_picture(result: Result) -> Picture:
    found, bed = result.found, result.bed
    diameter_um = np.where(found.target.active, bed.surface_median_diameter * 1e6, np.nan)
    layers = [
        Layer("rim weight", np.where(found.target.active, bed.rim_weight, np.nan), label="share of the rim's own bed"),
        Layer("median diameter of the first layer", np.log10(diameter_um), label="log10 of µm",
              limits=(float(np.nanmin(np.log10(diameter_um))), float(np.nanmax(np.log10(diameter_um))))),
    ]  # fmt: skip
    return picture(
        draw_maps(found.target, layers),
        "The bed as the model gets it, with the rim along the open boundary.",
        "Maps of the rim's weight and of the median diameter.",
    )


def _class_layer(result: Result) -> Layer:
    from texture.composition import find_scheme
    from texture.output import class_colours

    scheme = find_scheme("folk")
    values = np.where(result.estimate.texture_class > 0, result.estimate.texture_class.astype(float), np.nan)
    names = dict(zip(scheme.numbers, scheme.words, strict=True))
    return Layer("most probable texture class", values, names=names, colours=class_colours(scheme.numbers))


def _method_line(result: Result) -> str:
    found = result.found
    wet = int(found.target.active.sum())
    inside = result.points_per_side**2
    return (
        f"{found.target.name}: {found.target.size_text}, {wet:,} of them water, about "
        f"{found.cell_side_m:,.0f} m wide. Method: {found.recipe.method.name.replace('_', ' ')} of "
        f"{', '.join(found.mapper.column_names)}; distance {_distance(result)}; zeros: {found.mapper.treatment.label}; {inside} point{'s' * (inside > 1)} a cell."
    )


def _distance(result: Result) -> str:
    """What distance means, and how far each covariate reaches."""
    mapper = result.found.mapper
    text = space_line(mapper.space)
    for name, covariance in zip(mapper.column_names, mapper.structure, strict=True):
        ranges = ", ".join(f"{c} {r:.2g}" for c, r in own_ranges(mapper.space, covariance).items())
        text += f"; ranges of {name} in standard deviations: {ranges}" if ranges else ""
    return text


def _map_notes(result: Result) -> list[str]:
    found = result.found
    notes = [
        f"{100 * result.beyond_share:.1f} % of the water area lies further than {found.reach_m / 1000:.1f} km from every sample, "
        "further than any held-out station was predicted from; it is flagged as extrapolated."
    ]
    notes += [f"{n[0].upper()}{n[1:]}." for n in found.target.notes]
    spaces = dict.fromkeys(n for s in found.spaces.values() for n in s.notes)
    notes += [f"{n[0].upper()}{n[1:]}." for n in spaces]
    notes += (
        ["Outer edge of the grid: " + "; ".join(str(o) for o in found.target.openings) + "."]
        if found.target.openings
        else []
    )
    return notes


def _folds_line(result: Result) -> str:
    folds = result.found.validation.folds
    line = f"Stations were held out in {folds.count} folds ({folds.kind}), and whatever learns from fractions was fitted anew without them."
    if np.isfinite(folds.wasserstein):
        line += (
            f" Distances from held-out to kept stations differ from those of the map's cells to the stations by {folds.wasserstein:,.0f} m on "
            f"average (Wasserstein-1; random folds: {folds.wasserstein_random:,.0f} m)."
        )
    return line + (f" {folds.note[0].upper()}{folds.note[1:]}." if folds.note else "")


def _error_notes(result: Result) -> list[str]:
    found, notes = result.found, []
    for part, i in zip(found.recipe.composition.parts, range(9), strict=False):
        mean = float(np.nanmean(found.observations.fractions[:, i]))
        error = found.validation.chosen.score(part, "mean_error")
        if abs(error) > mean / 10.0:
            notes.append(
                f"Look at {part}: its mean error {error:+.3f} is more than a tenth of its mean {mean:.3f}; the map has "
                f"too {'much' if error > 0 else 'little'} of it overall."
            )
    return notes


def _opinion_line(result: Result) -> str:
    if result.look is None:
        return "The method has no variance, so no second opinion was sought."
    return " ".join(f"{text[0].upper()}{text[1:]}." for text in (str(result.look.opinion), str(result.look.honesty)))


def _place_line(result: Result) -> str:
    """Say which stations count for less because their places are badly known; empty where none does."""
    from texture.structure.displacement import place_noise

    learned = result.found.validation.learned
    accuracy = learned.observations.accuracy_m
    noise = place_noise(learned.structure, accuracy, np.zeros(learned.values.shape))
    rough = (noise > 0.0).any(axis=1)
    if not rough.any():
        return ""
    sills = [max(sum(s.sill for s in c.structures), 1e-12) for c in learned.structure]
    low, high = (f"{v:,.0f}" for v in (accuracy[rough].min(), accuracy[rough].max()))
    return (
        f"The places of {int(rough.sum()):,} stations are known to no better than ± {low}{f' to {high}' * (high != low)} m. That is noise with up to "
        f"{100 * float((noise / sills).max()):.0f} % of the fitted sill: the variance between two points of the bed as far apart as that."
    )


def _bed_notes(result: Result) -> list[str]:
    account = result.bed.account
    notes = [
        f"{100 * account.share_below_samples:.0f} % of the bed's mass lies below any sample: those layers are what the recipe says, not what was found."
    ]
    if account.rim_cells:
        notes.append(f"The rim touches {account.rim_cells:,} cells; it is numerical, not observed.")
    else:
        notes.append("No rim was asked for: the open boundary has the estimate itself.")
    if account.not_given:
        notes.append(
            f"Not given, and not to be had from grain size: {', '.join(account.not_given)}. The model has to be told."
        )
    return notes
