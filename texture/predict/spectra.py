"""Spectral densities of the correlation models: where the variance of a field lies among frequencies.

With `w` the angular frequency in radians per metre, ``a`` the model's scale and ``R = a |w|``, in D dimensions:

===================  ==========================================================================
exponential, matern  ``Gamma(nu + D/2) / (Gamma(nu) pi**(D/2)) a**D (1 + R**2)**-(nu + D/2)``
gaussian             ``(a / (2 sqrt(pi)))**D exp(-R**2 / 4)``
spherical            D = 3: ``12 a**3 (sin s - s cos s)**2 / (pi**2 R**6)``, s = R / 2
cubic                D = 3: the sine transform of the correlation, by quadrature
===================  ==========================================================================

Each integrates to 1 over all frequencies. Spherical and cubic models have no such form in the plane; a field of them in
three dimensions, looked at in a plane, has the same covariance. Matérn: Stein (1999), section 2.7; others by Fourier
transform of the formulas in `texture.structure.models`.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from texture.structure.covariance import Structure

__all__ = ["density", "radius_quantile", "spectral_dimensions"]

Array = NDArray[np.float64]

TABLE_TO = 200.0
"""R up to which the cubic model's density is integrated, and both compact models' distribution is tabled: beyond it lie
6e-6 of the cubic model's variance and 1 % of the spherical one's, which follow their asymptotes."""
STEP = 0.02
CUBIC_TAIL = 10.64
"""The cubic model's density is 10.64 / R**6 far out: Fourier transform of its term 8.75 x**3."""


def spectral_dimensions(structures: list[Structure], dimensions: int) -> int:
    """Dimensions to draw frequencies in: those of the points, or three where a model has a density only there."""
    return max(dimensions, 3) if any(s.dimensions is not None for s in structures) else dimensions


def _smoothness(structure: Structure) -> float:
    return 0.5 if structure.model == "exponential" else float(structure.smoothness or 0.5)


def density(structure: Structure, dimensions: int, radius: Array) -> Array:
    """Share of the variance per unit of frequency space at |w| = `radius` (rad/m), any shape."""
    a, d = structure.scale_m, dimensions
    r = a * np.asarray(radius, dtype=np.float64)
    if structure.model in ("exponential", "matern"):
        nu = _smoothness(structure)
        front = math.exp(math.lgamma(nu + d / 2) - math.lgamma(nu)) / math.pi ** (d / 2) * a**d
        return np.asarray(front * (1.0 + r * r) ** -(nu + d / 2))
    if structure.model == "gaussian":
        return np.asarray((a / (2.0 * math.sqrt(math.pi))) ** d * np.exp(-0.25 * r * r))
    return np.asarray(a**3 * (_spherical(r) if structure.model == "spherical" else _cubic(r)))


def radius_quantile(structure: Structure, dimensions: int, probability: Array) -> Array:
    """|w| (rad/m) below which the share `probability` of the variance lies."""
    from scipy.special import betaincinv, gammaincinv

    p = np.asarray(probability, dtype=np.float64)
    if structure.model in ("exponential", "matern"):
        share = betaincinv(dimensions / 2, _smoothness(structure), p)
        return np.asarray(np.sqrt(share / (1.0 - share)) / structure.scale_m)
    if structure.model == "gaussian":
        return np.asarray(2.0 * np.sqrt(gammaincinv(dimensions / 2, p)) / structure.scale_m)
    r, below = _table(structure.model)
    # Beyond the table the tails are 6 / (pi R) and 44.6 / R**3 of the variance; the table was closed with them.
    power = 1.0 if structure.model == "spherical" else 3.0
    far = TABLE_TO * ((1.0 - below[-1]) / np.maximum(1.0 - p, 1e-300)) ** (1.0 / power)
    return np.asarray(np.where(p <= below[-1], np.interp(p, below, r), far) / structure.scale_m)


def _spherical(r: Array) -> Array:
    s = 0.5 * np.maximum(r, 1e-3)
    near = s < 0.05
    # sin s - s cos s = s**3 / 3 - s**5 / 30 + … cancels near 0.
    top = np.where(near, s**3 / 3.0 - s**5 / 30.0, np.sin(s) - s * np.cos(s))
    return np.asarray(12.0 * top**2 / (math.pi**2 * (2.0 * s) ** 6))


def _cubic(r: Array) -> Array:
    x, weight = np.polynomial.legendre.leggauss(200)
    x, weight = 0.5 * (x + 1.0), 0.5 * weight
    correlation = 1.0 - 7.0 * x**2 + 8.75 * x**3 - 3.5 * x**5 + 0.75 * x**7
    flat = np.minimum(r.ravel(), TABLE_TO)
    out = np.empty(flat.size)
    for start in range(0, flat.size, 4096):
        some = flat[start : start + 4096, None]
        out[start : start + 4096] = (np.sinc(some * x / math.pi) * (weight * correlation * x**2)).sum(axis=1)
    out = np.where(r.ravel() > TABLE_TO, CUBIC_TAIL / np.maximum(r.ravel(), 1.0) ** 6, out / (2.0 * math.pi**2))
    return np.maximum(out, 0.0).reshape(r.shape)


@lru_cache(maxsize=2)
def _table(model: str) -> tuple[Array, Array]:
    """R and the share of variance below it."""
    from scipy.integrate import cumulative_simpson

    r = np.arange(0.0, TABLE_TO + STEP / 2, STEP)
    shell = 4.0 * math.pi * r**2 * (_spherical(r) if model == "spherical" else _cubic(r))
    below = cumulative_simpson(shell, x=r, initial=0.0)
    tail = 6.0 / (math.pi * TABLE_TO) if model == "spherical" else 4.0 * math.pi * CUBIC_TAIL / (3.0 * TABLE_TO**3)
    below = np.maximum.accumulate(below)
    return r, below * (1.0 - tail) / below[-1]
