"""Sentences of the page: what was asked, and what a reader should know of map, error and bed."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.space import own_ranges, space_line

if TYPE_CHECKING:
    from texture.result import Result

__all__ = [
    "CAUTIONS",
    "bed_notes",
    "error_notes",
    "folds_line",
    "hidden_line",
    "map_notes",
    "method_line",
    "opinion_line",
    "place_line",
    "sentence",
    "versions_line",
    "word_line",
]

CAUTIONS = (
    "The bed shown is smoother than any real bed: it is an expected mean of each cell, not a possible bed.",
    "Grabs under-sample rock and gravel and lose fines on the way up; gravel shares from small grabs are rough.",
    "Settling, erosion and strength of mud are not in grain size: the numbers that stand for them were given, not mapped.",
    "The rim along the open boundary is numerical, not observed.",
    "Below the depth of the samples the bed is a guess; its share of the mass is stated above.",
    "Not for navigation, foundations or permits. Local data and licensed practice come first.",
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


def method_line(result: Result) -> str:
    """Say what was asked: the grid, the method, its coordinates."""
    found = result.found
    wet = int(found.target.active.sum())
    inside = result.points_per_side**2
    return (
        f"{found.target.name}: {found.target.size_text}, {wet:,} of them water, about "
        f"{found.cell_side_m:,.0f} m wide. Method: {found.validation.method.replace('_', ' ')} of "
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


def map_notes(result: Result) -> list[str]:
    """Say how far the samples reach, and what was found out about the grid."""
    found = result.found
    notes = [
        f"{100 * result.beyond_share:.1f} % of the water area lies further than {found.reach_m / 1000:.1f} km from every sample, "
        "further than any held-out station was predicted from; it is flagged as extrapolated."
    ]
    notes += [f"{sentence(n)}." for n in found.target.notes]
    spaces = dict.fromkeys(n for s in found.spaces.values() for n in s.notes)
    notes += [f"{sentence(n)}." for n in spaces]
    notes += (
        [
            "Outer edge of the grid: "
            + "; ".join(f"{i}, {o}" for i, o in enumerate(found.target.openings, start=1))
            + "."
        ]
        if found.target.openings
        else []
    )
    return notes


def folds_line(result: Result) -> str:
    """Say how stations were held out."""
    folds = result.found.validation.folds
    line = f"Stations were held out in {folds.count} folds ({folds.kind}), and whatever learns from fractions was fitted anew without them."
    if np.isfinite(folds.wasserstein):
        line += (
            f" Distances from held-out to kept stations differ from those of the map's cells to the stations by {folds.wasserstein:,.0f} m on "
            f"average (Wasserstein-1; random folds: {folds.wasserstein_random:,.0f} m)."
        )
    return line + (f" {folds.note[0].upper()}{folds.note[1:]}." if folds.note else "")


def error_notes(result: Result) -> list[str]:
    """Name the parts of which the map has too much or too little overall."""
    from texture.validation.choice import cannot_be_told_apart
    from texture.validation.told import told_text

    found, notes = result.found, []
    told = cannot_be_told_apart(found.validation.standings)
    if told:
        notes.append(f"{sentence(told)}.")
    unscored = told_text(found.validation.chosen.told)
    if unscored:
        notes.append(f"{sentence(unscored)}.")
    if found.validation.searched:
        notes.append(
            f"The recipe asked for the best method: {found.validation.method.replace('_', ' ')} is the simplest within one standard error of "
            "the lowest energy score."
        )
    if found.validation.judged.factors is not None:
        factors = zip(found.mapper.column_names, found.validation.judged.factors, strict=True)
        told = ", ".join(f"{name} by {factor:.2f}" for name, factor in factors)
        notes.append(f"Calibration multiplies the variance of {told}; the map's intervals and odds have it.")
    for part, i in zip(found.recipe.composition.parts, range(9), strict=False):
        mean = float(np.nanmean(found.observations.fractions[:, i]))
        error = found.validation.chosen.score(part, "mean_error")
        if abs(error) > mean / 10.0:
            notes.append(
                f"Look at {part}: its mean error {error:+.3f} is more than a tenth of its mean {mean:.3f}; the map has "
                f"too {'much' if error > 0 else 'little'} of it overall."
            )
    return notes


def opinion_line(result: Result) -> str:
    """Say what came of solving some cells again."""
    if result.look is None:
        return "The method has no variance, so no second opinion was sought."
    return " ".join(f"{text[0].upper()}{text[1:]}." for text in (str(result.look.opinion), str(result.look.honesty)))


def word_line(result: Result) -> str:
    """Say which described classes were calibrated on measured samples; empty where nothing was described."""
    learned = result.found.validation.learned
    observations, logratio = learned.observations, learned.treatment.logratio
    described = int((observations.described != "").sum())
    if not described:
        return ""
    told = [
        f"{c.code}: {logratio.coordinate_names[c.coordinate]} {c.mean:.2f} ± {c.variance**0.5:.2f} from {c.pairs} samples "
        f"(by the table of classes {c.table_mean:.2f} ± {c.table_variance**0.5:.2f})"
        for c in observations.calibrated_words(logratio)
    ]
    head = f"{described:,} stations are known by words alone."
    if not told:
        return f"{head} Too few measured samples stand beside them to calibrate the words on: each class is what its table says."
    return f"{head} Classes calibrated on measured samples beside them, the others by their table: {'; '.join(told)}."


def place_line(result: Result) -> str:
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


def bed_notes(result: Result) -> list[str]:
    """Say what of the bed nobody sampled, padded or gave."""
    account = result.bed.account
    notes = [
        f"{100 * account.share_below_samples:.0f} % of the bed's mass lies below any sample: those layers are what the recipe says, not what was found."
    ]
    for i, core in result.cores.items():
        share = core.share_sampled(result.found.target.active, result.found.target.area_m2)
        notes.append(
            f"Layer {i + 1} is filled from {core.line()}; {100 * share:.0f} % of the water area is within the tested reach of "
            "one, and the layer fades into the map away from them."
        )
    if account.rim_cells:
        notes.append(f"The rim touches {account.rim_cells:,} cells; it is numerical, not observed.")
    else:
        notes.append("No rim was asked for: the open boundary has the estimate itself.")
    for line in result.further_lines():
        notes.append(f"Further target, from the same fit and with the same classes and layers: {line}.")
    if account.not_given:
        notes.append(
            f"Not given, and not to be had from grain size: {', '.join(account.not_given)}. The model has to be told."
        )
    return notes


def hidden_line(result: Result) -> str:
    """Say which other files hold positions, where the recipe hides the stations; empty where it shows them."""
    if result.found.recipe.report.stations == "shown":
        return ""
    deeper = ", deeper.csv" if len(result.found.stations.deeper) else ""
    return (
        "The recipe hides the stations: this page, map.png and the figures show no position of a sample. "
        f"stations.csv, stations.gpkg, held_out.csv, audit.csv{deeper} and the input files still hold them; do not pass those on. "
        "The map itself bends toward each sample, so that its place may be guessed from texture.nc where samples are few."
    )


def sentence(text: str) -> str:
    """Begin with a capital letter.

    >>> sentence("no rim")
    'No rim'
    """
    return text[:1].upper() + text[1:]
