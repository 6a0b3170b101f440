"""Properties of a bed that is a mixture of classes.

Fractions have the class first, shape (class, …), are of dry mass and sum to 1 along it.
"""

from __future__ import annotations

import numpy as np

from texture.bed.cells import Floats

__all__ = ["geometric_mean_diameter", "mean_critical_stress", "median_diameter", "weighted"]

ROUNDING = 1e-15
"""Fractions smaller than the rounding of their sum are no mass."""


def median_diameter(fraction: Floats, diameter_m: Floats) -> Floats:
    """Median grain diameter of a mixture, between the classes' diameters.

    Each class's own diameter is taken as its median: half of its mass is finer. Between these points of
    the cumulative curve the logarithm of the diameter is linear, and the median is read at one half.

    Parameters
    ----------
    fraction : float array, shape (k, …)
        NaN gives NaN.
    diameter_m : float array, shape (k,)

    Returns
    -------
    float array, shape (…)
        Metres, from the smallest to the largest of `diameter_m`; changes smoothly with the fractions.

    Examples
    --------
    Half of two sizes: the geometric mean.

    >>> float(median_diameter(np.array([0.5, 0.5]), np.array([1e-4, 1e-2])).round(6))
    0.001
    """
    order = np.argsort(diameter_m, kind="stable")
    size = np.log(diameter_m[order])
    below = np.zeros(fraction.shape[1:])
    result = np.full(fraction.shape[1:], size[0])
    for i in range(size.size - 1):
        here, next_ = fraction[order[i]], fraction[order[i + 1]]
        centre = below + here / 2.0
        width = (here + next_) / 2.0
        # Classes without mass stand at one point of the curve: all of the step lies on one side of a half.
        step = np.divide(0.5 - centre, width, out=np.asarray(centre < 0.5, dtype=np.float64), where=width > ROUNDING)
        result += (size[i + 1] - size[i]) * np.clip(step, 0.0, 1.0)
        below = below + here
    return np.where(np.isnan(fraction).any(axis=0), np.nan, np.exp(result))


def geometric_mean_diameter(fraction: Floats, diameter_m: Floats) -> Floats:
    """Geometric mean diameter of a mixture by mass, exp(Σ f ln d), shape (…); NaN gives NaN.

    >>> float(geometric_mean_diameter(np.array([0.5, 0.5]), np.array([1e-4, 1e-2])).round(6))
    0.001
    """
    return np.asarray(np.exp(weighted(np.log(diameter_m), fraction)))


def mean_critical_stress(fraction: Floats, critical_stress_pa: Floats) -> Floats:
    """Mass-weighted mean of the classes' critical stresses, shape (…).

    NaN when a class has none: a mean over the others would call mud as strong as sand.

    Parameters
    ----------
    fraction : float array, shape (k, …)
    critical_stress_pa : float array, shape (k,), or one that goes with `fraction`
        Of the classes, by layer or cell where they differ there.
    """
    return weighted(critical_stress_pa, fraction)


def weighted(values: Floats, fraction: Floats) -> Floats:
    """Mean of the classes' values by mass, shape (…), from values of shape (k,) or (k, …)."""
    # Not a matrix product: its last digits depend on the shape of the block and the number of threads.
    return np.asarray(np.einsum("k...,k...->...", values, fraction))
