"""Scores of held-out predictions, per part and for the composition.

Only what was measured is scored: a station that knows its mud but not its gravel counts for mud alone.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["aitchison_error", "class_agreement", "concordance", "coverage", "part_scores", "r_squared", "score_table"]

Floats = NDArray[np.float64]


def r_squared(observed: Floats, predicted: Floats) -> float:
    """1 − SSE/SST about the observed mean; NaN where the observed do not vary.

    >>> r_squared(np.array([0.0, 1.0]), np.array([0.5, 0.5]))
    0.0
    """
    total = float(((observed - observed.mean()) ** 2).sum())
    return 1.0 - float(((observed - predicted) ** 2).sum()) / total if total > 0.0 else np.nan


def concordance(observed: Floats, predicted: Floats) -> float:
    """Lin's (1989) concordance correlation coefficient; NaN where neither varies and they agree.

    >>> float(concordance(np.array([0.0, 1.0, 2.0]), np.array([1.0, 2.0, 3.0])).round(3))
    0.571
    """
    spread = observed.var() + predicted.var() + (observed.mean() - predicted.mean()) ** 2
    covariance = ((observed - observed.mean()) * (predicted - predicted.mean())).mean()
    return np.float64(2.0 * covariance / spread) if spread > 0.0 else np.float64(np.nan)


def coverage(observed: Floats, low: Floats, high: Floats, limit: float = 0.0) -> float:
    """Share of the observed inside their intervals; NaN where no interval was given.

    An interval that begins below the detection limit reaches down to zero: a laboratory that writes 0
    says no more than that.
    """
    known = np.isfinite(low) & np.isfinite(high)
    inside = (observed >= np.where(low < limit, 0.0, low)) & (observed <= high)
    return float(inside[known].mean()) if known.any() else np.nan


def part_scores(observed: Floats, predicted: Floats, low: Floats, high: Floats, limit: float = 0.0) -> dict[str, float]:
    """Scores of one part; arrays of shape (n,), rows with a NaN observation or prediction left out."""
    known = np.isfinite(observed) & np.isfinite(predicted)
    if not known.any():
        return {"n": 0.0}
    o, p = observed[known], predicted[known]
    error = p - o
    return {
        "n": float(known.sum()),
        "mean_error": float(error.mean()),
        "mean_absolute_error": float(np.abs(error).mean()),
        "rmse": float(np.sqrt((error**2).mean())),
        "r_squared": r_squared(o, p),
        "concordance": float(concordance(o, p)),
        "coverage_90": coverage(o, low[known], high[known], limit),
    }


def aitchison_error(observed: Floats, predicted: Floats, limit: float) -> float:
    """Mean Aitchison distance over fully known rows, parts below `limit` lifted to it first."""
    known = np.isfinite(observed).all(axis=1) & np.isfinite(predicted).all(axis=1)
    if not known.any():
        return np.nan
    logs = [np.log(np.maximum(a[known], limit)) for a in (observed, predicted)]
    centred = [a - a.mean(axis=1, keepdims=True) for a in logs]
    return float(np.sqrt(((centred[0] - centred[1]) ** 2).sum(axis=1)).mean())


def class_agreement(observed: Floats, predicted: Floats, scheme: str, trace: float) -> float:
    """Share of fully known rows whose texture class is predicted."""
    from texture.composition import classify

    known = np.isfinite(observed).all(axis=1) & np.isfinite(predicted).all(axis=1)
    if not known.any():
        return np.nan
    return float(
        (classify(observed[known], scheme, trace=trace) == classify(predicted[known], scheme, trace=trace)).mean()
    )


def score_table(
    parts: tuple[str, ...], observed: Floats, predicted: Floats, low: Floats, high: Floats, limit: float
) -> list[dict[str, str | float]]:
    """Score every part and the composition.

    Parameters
    ----------
    parts : tuple of str
    observed, predicted, low, high : float arrays, shape (n, parts)
        Fractions, and the ends of the 90 % interval of a sample (NaN where the method has none).
    limit : float
        Detection limit: the trace below which gravel does not name a class, the floor of the Aitchison
        distance, and the level below which an interval reaches down to zero.

    Returns
    -------
    list of dict
        One row for each score: part ("all" for the composition), score, value.
    """
    rows: list[dict[str, str | float]] = []
    for i, part in enumerate(parts):
        for score, value in part_scores(observed[:, i], predicted[:, i], low[:, i], high[:, i], limit).items():
            rows.append({"part": part, "score": score, "value": value})
    rows.append({"part": "all", "score": "aitchison_distance", "value": aitchison_error(observed, predicted, limit)})
    rows.append(
        {"part": "all", "score": "class_agreement", "value": class_agreement(observed, predicted, "folk", limit)}
    )
    return rows
