"""From a member's columns to the fractions of parts in a cell, by the treatment of zeros that the map was made with."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.treatments import Presence

if TYPE_CHECKING:
    from texture.mapping import Mapper

__all__ = ["member_fractions"]

Floats = NDArray[np.float64]
LEAST = 1e-6
"""Probabilities nearer to 0 or 1 are taken as this far from them."""


def member_fractions(
    mapper: Mapper, fields: Floats, mean: Floats, variance: Floats, within: Floats, median: bool = False
) -> Floats:
    """Fractions of one member at points, shape (m, parts): the mean of a small area around each.

    What averages out inside the area is integrated rather than drawn: a cell holds far more patches than it has points, and the
    map's own quantiles of a cell mean do the same.

    Parameters
    ----------
    mapper : Mapper
    fields : float array, shape (m, k)
        The member's columns, of the small-scale variation only what a cell has in common.
    mean, variance : float arrays, shape (m, k)
        Of the map at the points.
    within : float array, shape (m, k)
        Variance that averages out inside the cell; 0 on a station, where the bed is known to the point.
    median : bool
        Plain back-transform, as the map's own where `method.estimate` is "median".
    """
    inside = mapper.covariance(within)
    treatment = mapper.treatment
    if not isinstance(treatment, Presence):
        return treatment.back(fields) if median else treatment.expected(fields, inside)
    from texture.composition import presence_expected

    plain = treatment.logratio
    inner = fields[:, :-1]
    there = _share_present(fields[:, -1], mean[:, -1], variance[:, -1], within[:, -1])
    parts = plain.inverse(inner) if median else plain.expected(inner, np.ascontiguousarray(inside[:, :-1, :-1]))
    return presence_expected(plain, parts, there, treatment.part)


def _share_present(field: Floats, mean: Floats, variance: Floats, within: Floats) -> Floats:
    """Share of a small area that has the part: a probability field (Froidevaux 1993).

    The kriged indicator is the probability of presence; the member's own departure from it, in standard deviations, is a
    standard normal that is alike at places as far as their kriging errors are. Where it lies below the probability's
    quantile the part is there. What averages out inside the area softens that step as it does in the map's quantiles.
    """
    from scipy.special import ndtr, ndtri

    p = np.clip(mean, LEAST, 1.0 - LEAST)
    between = np.maximum(variance - within, 0.0)
    spread = np.sqrt(between)
    hidden = np.divide(field - mean, spread, out=np.zeros_like(field), where=spread > 1e-9)
    tie = np.sin(0.5 * np.pi * np.clip(between / (p * (1.0 - p)), 0.0, 1.0))
    threshold = ndtri(p) + np.sqrt(tie) * hidden
    soft = ndtr(threshold / np.sqrt(np.maximum(1.0 - tie, 1e-12)))
    return np.asarray(np.where(tie >= 1.0 - 1e-9, (threshold > 0.0).astype(np.float64), soft))
