"""Tables of which method to trust and of how far the stated uncertainty can be."""

from __future__ import annotations

from typing import TYPE_CHECKING

from texture.report.table import Table, number
from texture.validation.choice import cannot_be_told_apart
from texture.validation.scores import quantile_cover

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["agreement_table", "quantiles_table", "standings_table"]


def standings_table(result: Result) -> Table:
    """Methods by the energy score of the composition, and who cannot be told apart."""
    validation = result.found.validation
    held = {m.method: m for m in validation.methods}
    rows = []
    for s in validation.standings:
        scores = [
            held[s.method].score("all", name) for name in ("aitchison_distance", "class_agreement", "class_kappa")
        ]
        rows.append(
            [s.method.replace("_", " "), number(s.energy_score, 4), number(s.above_best, 4), number(s.standard_error, 4),
             f"{number(s.low, 4)} to {number(s.high, 4)}", *(number(v, 2) for v in scores)]
        )  # fmt: skip
    told = cannot_be_told_apart(validation.standings)
    own, plain = validation.choice.chosen.treatment.label, validation.plain.treatment.label
    zeros = f"{validation.choice.chosen.held_out.method.replace('_', ' ').capitalize()} stands here with the treatment of zeros that was chosen ({own}), the others with {plain}. "
    searched = "The map takes the simplest within one standard error of the best. " if validation.searched else ""
    return Table(
        "Energy score of the composition (lower is better; Gneiting & Raftery 2007), how far above the best, and its standard error and 90 % "
        "interval from resampled blocks of stations. Methods without a variance take part with the spread of their held-out errors. "
        + (zeros if own != plain else "")
        + searched
        + (told[:1].upper() + told[1:] + "." if told else ""),
        ["method", "energy score", "above the best", "standard error", "90 % interval", "Aitchison distance", "class agreement", "kappa"],
        rows,
        numeric=list(range(1, 8)),
        chosen=next((i for i, s in enumerate(validation.standings) if s.method == validation.method), -1),
    )  # fmt: skip


def quantiles_table(result: Result) -> Table:
    """Share of held-out samples below each quantile, before and after calibration."""
    found = result.found
    parts, judged = found.recipe.composition.parts, found.validation.judged
    rows = [
        [f"{100 * level:.0f} %", *(f"{number(100 * v, 1)} %" for pair in zip(before, after, strict=True) for v in pair)]
        for level, before, after in quantile_cover(judged.before, found.validation.chosen.draws)
    ]
    if judged.factors is None:
        said = "The method has no variance: its intervals are the spread of its held-out errors in the other folds."
    else:
        factors = ", ".join(
            f"{name} {number(f, 2)}" for name, f in zip(found.mapper.column_names, judged.factors, strict=True)
        )
        said = (
            f"The variance of each coordinate, noise and all, is multiplied by a factor ({factors}); each sample is judged with "
            "factors from the other folds."
        )
    return Table(
        "Share of held-out samples below each quantile that was predicted for them, before and after calibration; a sample below the detection "
        f"limit counts as anywhere below it. {said}",
        ["quantile", *(f"{part} {when}" for part in parts for when in ("before", "after"))],
        rows,
        numeric=list(range(1, 1 + 2 * len(parts))),
    )


def agreement_table(result: Result) -> Table:
    """Texture classes of held-out stations, measured against predicted."""
    agreement = result.found.validation.chosen.agreement
    rows = [
        [code, *(str(n) if n else "·" for n in row)]
        for code, row in zip(agreement.codes, agreement.confusion, strict=True)
    ]
    return Table(
        "Texture classes of held-out stations: measured in rows, predicted in columns.",
        ["measured", *agreement.codes],
        rows,
        numeric=list(range(1, 1 + len(agreement.codes))),
    )  # fmt: skip
