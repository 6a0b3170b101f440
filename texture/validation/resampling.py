"""Weights of stations: what the scores are resampled with, and what part of the map each station stands for."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["RESAMPLES", "block_weights", "map_weights"]

Floats = NDArray[np.float64]

RESAMPLES = 200  # the ends of a 90 % interval then rest on ten resamples each
LEAST_BLOCKS = 5  # fewer cannot show how much a score varies


def block_weights(points: Floats, block_m: float, seed: int, count: int = RESAMPLES) -> Floats:
    """How often each station stands in each resample of whole blocks, shape (count, n).

    Stations near each other err together; square blocks of them are drawn with replacement (block bootstrap, Künsch 1989).
    Empty, shape (0, n), where there are fewer than five blocks.

    Parameters
    ----------
    points : float array, shape (n, d), metres
    block_m : float
        Side of a block.
    seed : int
    count : int
    """
    corner = points.min(axis=0)
    side = block_m if block_m > 0.0 else 1.0
    block = np.unique(np.floor((points - corner) / side), axis=0, return_inverse=True)[1].reshape(-1)
    blocks = int(block.max()) + 1
    if blocks < LEAST_BLOCKS:
        return np.empty((0, len(points)))
    drawn = np.random.default_rng(seed).multinomial(blocks, np.full(blocks, 1.0 / blocks), size=count)
    return drawn[:, block].astype(np.float64)


def map_weights(points: Floats, cells: Floats) -> Floats:
    """Share of the map that each station is nearest to, shape (n,), summing to 1: the inverse of sampling density.

    Polygonal declustering (Isaaks & Srivastava 1989, chapter 10), the polygons cut by the map. Stations at one place share
    what is theirs.

    Parameters
    ----------
    points : float array, shape (n, d)
    cells : float array, shape (m, d)
        Places spread evenly over the map.
    """
    from scipy.spatial import KDTree

    place, owner = np.unique(np.round(points), axis=0, return_inverse=True)
    owner = owner.reshape(-1)
    area = np.bincount(KDTree(place).query(cells)[1], minlength=len(place)).astype(np.float64)
    weight = area[owner] / np.bincount(owner)[owner]
    return np.asarray(weight / weight.sum())
