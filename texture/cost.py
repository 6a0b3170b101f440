"""Seconds that fitting and validating take, from counts alone.

Measured on two cores of one machine: the demo, 494 stations, fit 5.4 s, validate 15.3 s.
"""

from __future__ import annotations

__all__ = ["about", "fit_seconds", "validate_seconds"]

FIT_S = 1.0  # one fit of all coordinates on 500 stations
REFIT_S = 0.25  # the same inside a fold, from a warm start
DENSE_TO = 500  # stations up to which a fit grows with their square, beyond it in proportion


def fit_seconds(stations: int, treatments: int) -> float:
    """Of fitting all treatments of zeros once."""
    return treatments * FIT_S * _growth(stations)


def validate_seconds(stations: int, fitted: int, folds: int) -> float:
    """Of refitting in each fold the methods (or treatments) that have a covariance; the others take little beside them."""
    return fitted * folds * REFIT_S * _growth(stations)


def about(seconds: float) -> str:
    """Two digits are more than a plan knows.

    >>> about(0.3), about(42), about(600)
    ('1 s', '42 s', '10 min')
    """
    if seconds < 90:
        return f"{max(round(seconds), 1)} s"
    return f"{round(seconds / 60)} min" if seconds < 5400 else f"{seconds / 3600:.1f} h"


def _growth(stations: int) -> float:
    share = stations / DENSE_TO
    return max(share**2, 0.1) if share <= 1.0 else share
