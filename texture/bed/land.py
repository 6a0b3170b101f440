"""Values for land cells, so that a model which wets one later finds a bed there."""

from __future__ import annotations

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import dijkstra

from texture.bed.cells import Cells, Ints
from texture.errors import BedError

__all__ = ["nearest_water"]


def nearest_water(cells: Cells) -> Ints:
    """For each cell the water cell it takes its bed from, itself if it is water.

    The nearest is found from cell to cell of the grid, starting in the water cells that touch land: a land
    cell takes the bed of the water it borders on, not of another basin that is nearer as the crow flies.

    Parameters
    ----------
    cells : Cells

    Returns
    -------
    int array, shape (n,)
        Indices of water cells.

    Raises
    ------
    BedError
        If a land cell cannot be reached from any water.
    """
    n = cells.active.size
    source = np.arange(n, dtype=np.int64)
    if cells.active.all():
        return source
    # A graph of land and shore alone: on ten million cells one of them all takes gigabytes.
    pairs = cells.edges[~cells.active[cells.edges].all(axis=1)]
    length = cells.distance_m(pairs)
    known = np.isfinite(length)
    # Land often has no coordinates in model grids; its cells then count as of ordinary size.
    length = np.where(known, length, np.median(length[known]) if known.any() else 1.0)
    there = np.zeros(n, dtype=bool)
    there[pairs.ravel()] = True
    cell = np.flatnonzero(there)
    shore = np.flatnonzero(cells.active[cell])
    source[~cells.active] = -1
    if shore.size:
        number = np.cumsum(there, dtype=np.int32) - 1
        graph = csr_array((length, number[pairs].T), shape=(cell.size, cell.size))
        del pairs, length, number
        _, _, found = dijkstra(graph, directed=False, indices=shore, min_only=True, return_predecessors=True)
        land = ~cells.active[cell] & (found >= 0)
        source[cell[land]] = cell[found[land]]
    lost = source < 0
    if lost.any():
        raise BedError(
            f"{int(lost.sum())} land cells of {cells.name} touch no water in any way; the bed cannot fill them"
        )
    return source
