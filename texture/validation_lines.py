"""What cross-validation found, as lines and a record: for the terminal, `--json` and provenance."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from texture.validation.attainable import attainable_text
from texture.validation.choice import cannot_be_told_apart
from texture.validation.scores import quantile_cover
from texture.validation.told import told_text

if TYPE_CHECKING:
    from texture.result import Validated

__all__ = ["validation_lines", "validation_record"]

COLUMNS = (
    ("rmse", "RMSE", 3),
    ("mean_error", "mean error", 3),
    ("r_squared", "R²", 2),
    ("coverage_90", "90 % cover", 2),
    ("crps", "CRPS", 3),
    ("skill_over_nearest", "skill", 2),
)


def validation_lines(found: Validated) -> list[str]:
    """A table with one row for each method and part, who cannot be told apart, and the calibration."""
    validation, parts = found.validation, found.recipe.composition.parts
    table = [["method", "part", *(label for _, label, _ in COLUMNS), "energy score"]]
    for held in validation.methods:
        name = held.method.replace("_", " ") + (" *" if held is validation.chosen else "")
        score = held.find("all", "energy_score")
        energy = _number(score.value, 4)
        if np.isfinite(score.low):
            energy += f" ({_number(score.low, 4)} to {_number(score.high, 4)})"
        for i, part in enumerate(parts):
            scores = [_number(held.score(part, key), digits) for key, _, digits in COLUMNS]
            table.append([name if i == 0 else "", part, *scores, energy if i == 0 else ""])
    widths = [max(len(row[c]) for row in table) for c in range(len(table[0]))]
    lines = ["  " + "  ".join(map(_padded, row, widths, range(len(row)))).rstrip() for row in table]
    lines.append(
        "  * the map's method; skill: share of the nearest station's mean square error that is gone; energy score with its "
        "90 % interval"
    )
    lines.append(f"  {attainable_text(parts, validation.chosen.score)}")
    unscored = told_text(validation.chosen.told)
    if unscored:
        lines.append(f"  {unscored}")
    told = cannot_be_told_apart(validation.standings)
    if told:
        lines.append(f"  apart       {told}")
    if validation.searched:
        lines.append(
            f"  best        {validation.method.replace('_', ' ')}: the simplest within one standard error of the lowest "
            "energy score"
        )
    if validation.judged.factors is not None:
        factors = ", ".join(f"{f:.2f}" for f in validation.judged.factors)
        lines.append(f"  calibration the variance of each coordinate is multiplied by {factors}")
    return lines


def validation_record(found: Validated) -> dict[str, Any]:
    """Choice, calibration and folds as plain numbers, None where there are none."""
    validation, parts = found.validation, found.recipe.composition.parts
    factors, folds = validation.judged.factors, validation.folds
    names = found.mapper.column_names
    record = {
        "method": validation.method,
        "searched": validation.searched,
        "standings": [{k: _known(v) for k, v in vars(s).items()} | {"apart": s.apart} for s in validation.standings],
        "told_apart": cannot_be_told_apart(validation.standings),
        "calibration": None if factors is None else dict(zip(names, factors.tolist(), strict=True)),
        "below_quantile": [
            {"level": level, **{key: dict(zip(parts, map(_known, shares), strict=True)) for key, shares in both}}
            for level, before, after in quantile_cover(validation.judged.before, validation.chosen.draws)
            for both in [(("before", before), ("after", after))]
        ],
        "folds": {
            "kind": folds.kind,
            "count": folds.count,
            "wasserstein_m": _known(folds.wasserstein),
            "wasserstein_random_m": _known(folds.wasserstein_random),
            "note": folds.note,
            "block_m": _known(validation.block_m),
        },
    }
    if validation.chosen.told:
        record["told"] = [{k: _known(v) for k, v in vars(t).items()} for t in validation.chosen.told]
    if validation.judged.settings:
        record["average"] = validation.judged.settings["weights"]
    return record


def _known(value: Any) -> Any:
    return None if isinstance(value, float) and not np.isfinite(value) else value


def _number(value: float, digits: int) -> str:
    return f"{value:.{digits}f}".replace("-", "−") if np.isfinite(value) else "–"


def _padded(cell: str, width: int, column: int) -> str:
    return cell.rjust(width) if 2 <= column < 2 + len(COLUMNS) else cell.ljust(width)
