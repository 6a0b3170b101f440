"""Scores of held-out predictions, per part and for the composition, under any weights of the stations.

Only what was measured is scored: a station that knows its mud but not its gravel counts for mud alone. Every score is a
function of weighted sums over stations, so that one implementation serves the plain score (weights of 1), the score of
the map (weights by the share of the map that a station stands for) and each resample of a bootstrap (whole numbers).
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from texture.validation.ensemble import DrawScores, pit_share_below

__all__ = [
    "QUANTILE_LEVELS",
    "aitchison_distance",
    "concordance",
    "inside_interval",
    "interval_score",
    "part_scores",
    "pit_histogram",
    "plain_scores",
    "quantile_cover",
    "r_squared",
    "weighted_mean",
]

Floats = NDArray[np.float64]

QUANTILE_LEVELS = (0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95)
PIT_BINS = 10


def weighted_mean(values: Floats, weights: Floats) -> Floats:
    """Weighted mean of the rows that are not NaN, shape (w,); NaN where none of them has weight.

    Parameters
    ----------
    values : float array, shape (n,)
    weights : float array, shape (w, n)
    """
    known = np.isfinite(values)
    kept = weights[:, known]
    total = kept.sum(axis=1)
    return _ratio(kept @ values[known], total)


def _ratio(top: Floats, bottom: Floats) -> Floats:
    return np.divide(top, bottom, out=np.full_like(top, np.nan), where=bottom > 0.0)


def _ones(values: Floats) -> Floats:
    return np.ones((1, len(values)))


def r_squared(observed: Floats, predicted: Floats, weights: Floats | None = None) -> Floats:
    """1 − SSE/SST about the observed mean, shape (w,); NaN where the observed do not vary.

    >>> r_squared(np.array([0.0, 1.0]), np.array([0.5, 0.5])).tolist()
    [0.0]
    """
    w = _ones(observed) if weights is None else weights
    centre = weighted_mean(observed, w)[:, None]
    total = (w * (observed - centre) ** 2).sum(axis=1)
    # What rounding leaves of a constant is no variation.
    flat = total <= 1e-24 * w.sum(axis=1)
    return np.where(flat, np.nan, 1.0 - _ratio(w @ (observed - predicted) ** 2, np.where(flat, 0.0, total)))


def concordance(observed: Floats, predicted: Floats, weights: Floats | None = None) -> Floats:
    """Lin's (1989) concordance correlation coefficient, shape (w,); NaN where neither varies and they agree.

    >>> concordance(np.array([0.0, 1.0, 2.0]), np.array([1.0, 2.0, 3.0])).round(3).tolist()
    [0.571]
    """
    w = _ones(observed) if weights is None else weights
    centres = [weighted_mean(v, w)[:, None] for v in (observed, predicted)]
    o, p = observed - centres[0], predicted - centres[1]
    total = w.sum(axis=1)
    spread = (w * (o**2 + p**2)).sum(axis=1) + total * (centres[0] - centres[1])[:, 0] ** 2
    return _ratio(2.0 * (w * o * p).sum(axis=1), spread)


def inside_interval(observed: Floats, low: Floats, high: Floats, limit: float = 0.0) -> Floats:
    """1 where the observed lie inside their intervals, 0 outside, NaN where no interval was given; shape (n,).

    An interval that begins below the detection limit reaches down to zero: a laboratory that writes 0
    says no more than that.
    """
    known = np.isfinite(low) & np.isfinite(high)
    inside = (observed >= np.where(low < limit, 0.0, low)) & (observed <= high)
    return np.where(known, inside, np.nan)


def interval_score(observed: Floats, low: Floats, high: Floats, miss: float = 0.1) -> Floats:
    """Width of the interval plus 2 / miss times how far the observed lie outside, shape (n,); lower is better.

    Gneiting & Raftery (2007), eq. 43; `miss` is the share that is meant to lie outside.

    >>> interval_score(np.array([0.5, 0.9]), np.array([0.2, 0.2]), np.array([0.8, 0.8])).round(6).tolist()
    [0.6, 2.6]
    """
    outside = np.maximum(low - observed, 0.0) + np.maximum(observed - high, 0.0)
    return np.asarray(high - low + 2.0 / miss * outside)


def aitchison_distance(observed: Floats, predicted: Floats, limit: float) -> Floats:
    """Aitchison distance of each fully known row, parts below `limit` lifted to it first; NaN for other rows."""
    logs = [np.log(np.maximum(a, limit)) for a in (observed, predicted)]
    centred = [a - a.mean(axis=1, keepdims=True) for a in logs]
    return np.asarray(np.sqrt(((centred[0] - centred[1]) ** 2).sum(axis=1)))


def pit_histogram(pit_low: Floats, pit_high: Floats, weights: Floats | None = None) -> Floats:
    """Share of the stations in each tenth of the probability integral transform, shape (w, 10); NaN without stations."""
    w = _ones(pit_low) if weights is None else weights
    edges = np.linspace(0.0, 1.0, PIT_BINS + 1)[1:-1]
    below = [weighted_mean(pit_share_below(pit_low, pit_high, level), w) for level in edges]
    bottom = np.where(np.isnan(below[0]), np.nan, 0.0)
    return np.diff(np.column_stack([bottom, *below, bottom + 1.0]), axis=1)


def quantile_cover(before: DrawScores, after: DrawScores) -> list[tuple[float, list[float], list[float]]]:
    """For each quantile level the share of held-out samples below it, part by part, by two distributions of each sample."""
    table = []
    for level in QUANTILE_LEVELS:
        shares = [
            [
                float(weighted_mean(pit_share_below(low, high, level), _ones(low))[0])
                for low, high in zip(d.pit_low.T, d.pit_high.T, strict=True)
            ]
            for d in (before, after)
        ]
        table.append((level, shares[0], shares[1]))
    return table


def part_scores(
    observed: Floats,
    predicted: Floats,
    weights: Floats,
    intervals: Mapping[float, tuple[Floats, Floats]],
    crps: Floats,
    pit: tuple[Floats, Floats],
    limit: float = 0.0,
    controls: Mapping[str, Floats] | None = None,
) -> dict[str, Floats]:
    """Scores of one part, each of shape (w,); rows with a NaN observation or prediction are left out.

    Parameters
    ----------
    observed, predicted : float arrays, shape (n,)
    weights : float array, shape (w, n)
    intervals : mapping of float to (low, high), each of shape (n,)
        Central intervals of a sample by the share they are meant to hold.
    crps : float array, shape (n,)
    pit : (low, high), each of shape (n,)
        See `texture.validation.ensemble.DrawScores`.
    limit : float
        Detection limit.
    controls : mapping, optional
        Predictions of other methods, for skill over them.
    """
    known = np.isfinite(observed) & np.isfinite(predicted)
    if not known.any():
        return {"n": np.zeros(len(weights))}
    o, p, w = observed[known], predicted[known], weights[:, known]
    scores = _error_scores(o, p, w)
    square = scores["rmse"] ** 2
    for name, other in (controls or {}).items():
        scores[f"skill_over_{name}"] = 1.0 - _ratio(square, weighted_mean((other[known] - o) ** 2, w))
    for share, (low, high) in intervals.items():
        scores[f"coverage_{round(100 * share)}"] = weighted_mean(inside_interval(o, low[known], high[known], limit), w)
    low, high = intervals[0.9]
    scores["interval_score_90"] = weighted_mean(interval_score(o, low[known], high[known]), w)
    scores["crps"] = weighted_mean(crps[known], w)
    for level in QUANTILE_LEVELS:
        below = pit_share_below(pit[0][known], pit[1][known], level)
        scores[f"below_quantile_{round(100 * level)}"] = weighted_mean(below, w)
    step = round(100 / PIT_BINS)
    for tenth, values in enumerate(pit_histogram(pit[0][known], pit[1][known], w).T):
        scores[f"pit_{step * tenth}_to_{step * (tenth + 1)}"] = values
    return scores


def plain_scores(observed: Floats, predicted: Floats, low: Floats, high: Floats) -> dict[str, float]:
    """Errors and 90 % coverage of one quantity that has no parts, all stations alike; arrays of shape (n,).

    >>> plain_scores(np.array([1.0, 2.0]), np.array([1.0, 3.0]), np.zeros(2), np.full(2, 1.5))["coverage_90"]
    0.5
    """
    known = np.isfinite(observed) & np.isfinite(predicted)
    if not known.any():
        return {"n": 0.0}
    o, weights = observed[known], np.ones((1, int(known.sum())))
    found = _error_scores(o, predicted[known], weights)
    found["coverage_90"] = weighted_mean(inside_interval(o, low[known], high[known]), weights)
    return {name: float(value[0]) for name, value in found.items()}


def _error_scores(observed: Floats, predicted: Floats, weights: Floats) -> dict[str, Floats]:
    error = predicted - observed
    return {
        "n": np.full(len(weights), float(len(observed))),
        "mean_error": weighted_mean(error, weights),
        "mean_absolute_error": weighted_mean(np.abs(error), weights),
        "rmse": np.sqrt(weighted_mean(error**2, weights)),
        "r_squared": r_squared(observed, predicted, weights),
        "concordance": concordance(observed, predicted, weights),
    }
