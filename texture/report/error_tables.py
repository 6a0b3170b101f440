"""Tables of how wrong the map is, and of the structure that was fitted."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.report.table import Table, number
from texture.space import own_ranges
from texture.validation.attainable import attainable_text

if TYPE_CHECKING:
    from texture.result import Result
    from texture.validation.held_out import Score

__all__ = ["limits_table", "methods_table", "structure_table", "treatments_table"]


SCORES = (
    ("mean_error", "mean error", 3),
    ("r_squared", "R²", 2),
    ("coverage_90", "90 % cover", 2),
    ("crps", "CRPS", 3),
    ("skill_over_nearest", "skill", 2),
)


def methods_table(result: Result) -> Table:
    """Held-out scores of each method and part, the map's own method first."""
    rows = []
    for method in result.found.validation.methods:
        energy = _with_interval(method.find("all", "energy_score"), 4)
        for i, part in enumerate(result.found.recipe.composition.parts):
            scores = [number(method.score(part, key), digits) for key, _, digits in SCORES]
            name = method.method.replace("_", " ")
            rmse = _with_interval(method.find(part, "rmse"), 3)
            rows.append([name, part, f"{method.score(part, 'n'):.0f}", rmse, *scores, energy if i == 0 else ""])
    return Table(
        "Held-out scores, the map's own method first. RMSE, mean error and CRPS are fractions of dry mass, RMSE with its 90 % interval from "
        "resampled blocks; mean error is prediction minus measurement. 90 % cover: share of held-out samples inside their 90 % interval. "
        "Skill: share of the nearest station's mean square error that is gone. Energy score: of the whole predicted composition, lower is better. "
        + attainable_text(result.found.recipe.composition.parts, result.found.validation.chosen.score)
        + ".",
        ["method", "part", "stations", "RMSE", *[label for _, label, _ in SCORES], "energy score"],
        rows,
        numeric=list(range(2, 5 + len(SCORES))),
    )


def _with_interval(score: Score, digits: int) -> str:
    text = number(score.value, digits)
    return f"{text} ({number(score.low, digits)} to {number(score.high, digits)})" if np.isfinite(score.low) else text


def treatments_table(result: Result) -> Table:
    """Treatments of zeros that were compared."""
    found = result.found
    parts, tried = found.recipe.composition.parts, found.validation.tried
    rows = []
    for t in tried:
        scores = [number(t.held_out.score(p, s)) for p in parts for s in ("rmse", "mean_error")]
        above = f"{number(t.above_best)} ± {number(t.standard_error)}"
        rows.append([t.treatment.label, number(t.error), above, *scores, "" if t.balanced else "out of balance"])
    return Table(
        "Treatments of zeros, each by the map's method on the same folds. Error: sum over parts of squared error relative to the part's "
        "variance; beside it how far above the best of those in balance, with the standard error of that. Out of balance: the mean error of a part is "
        "beyond a tenth of its mean, in which zeros count as what the values above the limit make of them. Of those within one standard error of the "
        "best in balance the first is taken, or the one whose assumption the measured values speak for."
        + _worth(result),
        ["treatment", "error", "above the best", *[f"{p} {s}" for p in parts for s in ("RMSE", "mean error")], ""],
        rows,
        numeric=list(range(1, 3 + 2 * len(parts))),
        chosen=next(i for i, t in enumerate(tried) if t.chosen),
    )


def _worth(result: Result) -> str:
    """What zeros were taken to be, and what choosing costs, in sentences."""
    choice, parts = result.found.validation.choice, result.found.recipe.composition.parts
    said = [f" Zeros of {part}: absence." for part, u in zip(parts, choice.unseen, strict=True) if u.absent]
    if len(choice.tried) > 1:
        said.append(
            f" The error of the one taken, {number(choice.chosen.error)}, was picked for being low. Where each fold is predicted by "
            f"what would have been picked without it, the error is {number(choice.blind_error)}."
        )
    return "".join(said)


def limits_table(result: Result) -> Table:
    """How the map's mean moves with the limit of detection."""
    effect, parts = result.found.validation.limit_effect, result.found.recipe.composition.parts
    rows = []
    if effect is not None:
        for i, part in enumerate(parts):
            moved = [number(m[i] - effect.mean[i], 4) for m in (effect.halved, effect.doubled)]
            rows.append([part, number(effect.mean[i], 4), *moved])
    limit = "" if effect is None else f" ({effect.limit:g}), over {effect.cells:,} cells"
    return Table(
        f"How far the map's mean moves when the limit that zeros are treated at is halved and doubled{limit}.",
        ["part", "mean", "limit halved", "limit doubled"],
        rows,
        numeric=[1, 2, 3],
    )


def structure_table(result: Result) -> Table:
    """Fitted structure of each column."""
    mapper = result.found.mapper
    rows, more = [], []
    for name, c in zip(mapper.column_names, mapper.structure, strict=True):
        turned = ["along azimuth {:.0f}°, {:.2g} times that across it".format(*c.anisotropy)] if c.anisotropy else []
        more.append(", ".join(turned + [f"{n} {r:.2g} sd" for n, r in own_ranges(mapper.space, c).items()]))
        model = " + ".join(s.model + (f" {s.smoothness:g}" if s.smoothness else "") for s in c.structures) or "none"
        sill = sum(s.sill for s in c.structures)
        rows.append(
            [name, model, number(c.range_m / 1000, 1) if c.structures else "–"]
            + [number(v, 2) for v in (sill, c.small_scale, c.survey)]
        )
    return Table(
        "Fitted structure of each log-ratio coordinate. Range: where the correlation has fallen to 0.05. Small-scale: "
        "the bed's own patchiness below the sampling distance. Survey: variance of the offset that samples of one survey share.",
        ["coordinate", "model", "range, km", "sill", "small-scale", "survey"] + ["direction, other ranges"] * any(more),
        [[*row, text] for row, text in zip(rows, more, strict=True)] if any(more) else rows,
        numeric=[2, 3, 4, 5],
    )
