"""Random numbers of the members: each a function of the seed, the member and the place, never of how the work is cut up."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

__all__ = ["AMPLITUDES", "LATTICE", "NOISE", "PRESENCE", "STATIONS", "SURVEYS", "colour", "generator", "place_normals"]

Array = NDArray[np.float64]
AMPLITUDES, LATTICE, STATIONS, NOISE, SURVEYS, PLACES, PRESENCE = range(1, 8)
"""Streams: what a generator is for. No two share a number of theirs."""


def generator(seed: int, member: int, stream: int) -> np.random.Generator:
    """Generator of one member and one purpose.

    >>> generator(1, 7, NOISE).normal() == generator(1, 7, NOISE).normal()
    True
    """
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, member, stream])))


def colour(correlation: Array) -> Array:
    """Matrix L with L L' = correlation, shape (v, v), also where columns hang together exactly."""
    value, vector = np.linalg.eigh(correlation)
    root = vector * np.sqrt(np.maximum(value, 0.0))
    # The lower triangle is the same for every way of ordering equal eigenvalues.
    lower = np.linalg.qr(root.T)[1].T
    return np.asarray(lower * np.where(np.diag(lower) < 0.0, -1.0, 1.0))


def place_normals(points: Array, seed: int, members: Sequence[int], columns: int) -> Array:
    """Standard normals that belong to places, shape (m, columns, r): the same wherever a place is asked for.

    Parameters
    ----------
    points : float array, shape (m, d), metres
        Taken to the nearest micrometre.
    """
    from scipy.special import ndtri

    cell = np.round(np.asarray(points, dtype=np.float64) * 1e6).astype(np.int64).view(np.uint64)
    place = np.full(len(cell), np.uint64(seed))
    for axis in range(cell.shape[1]):
        place = _mixed(place ^ _mixed(cell[:, axis]))
    out = np.empty((len(cell), columns, len(members)))
    for j, member in enumerate(members):
        for v in range(columns):
            key = _mixed(np.array([member * 64 + v], dtype=np.uint64) ^ np.uint64(PLACES << 56))
            bits = _mixed(place ^ key) >> np.uint64(11)
            out[:, v, j] = ndtri((bits.astype(np.float64) + 0.5) * 2.0**-53)
    return out


def _mixed(x: NDArray[np.uint64]) -> NDArray[np.uint64]:
    """Bits stirred until each of them hangs on all of them (Steele, Lea & Flood 2014, the mixer of SplitMix64)."""
    x = x + np.uint64(0x9E3779B97F4A7C15)
    x = (x ^ (x >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    x = (x ^ (x >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return x ^ (x >> np.uint64(31))
