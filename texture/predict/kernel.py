"""The compiled kernel: one neighbourhood and one factor per tile and model, its cells by forward substitution alone."""

from __future__ import annotations

import numpy as np

from texture.compiling import compiled
from texture.predict.block import LANES, Cells, krige_cells, make_lanes
from texture.predict.cuts import Boxes
from texture.predict.equations import Factors, Models, factor_neighbourhood, make_factors
from texture.predict.neighbours import Tree
from texture.predict.union import neighbourhood

__all__ = ["factor_stations", "krige_stations", "krige_tiles"]


@compiled
def krige_tiles(
    models: Models,
    tree: Tree,
    boxes: Boxes,
    neighbours: int,
    capacity: int,
    tile_of_run: np.ndarray,
    run_begin: np.ndarray,
    cells: Cells,
    which: np.ndarray,
    mean: np.ndarray,
    variance: np.ndarray,
    repairs: np.ndarray,
) -> None:
    """Krige runs of cells, each run from the stations of one tile.

    Parameters
    ----------
    capacity : most stations of a neighbourhood
    tile_of_run : (r,) tile of each run; run_begin : (r + 1,) where its cells begin in `which`
    which : (p,) rows of `cells`
    mean : (p, v, values), variance : (p, v), written in the order of `which`
    repairs : (2,) tiles with redundant stations and such stations, added to
    """
    stamp = np.full(tree.points.shape[0], -1, dtype=np.int64)
    station = np.empty(capacity, dtype=np.int64)
    factors, lanes = make_factors(models, capacity), make_lanes(models, capacity, LANES)
    for run in range(tile_of_run.size):
        count = neighbourhood(tile_of_run[run], tree, boxes, neighbours, stamp, station)
        redundant = factor_neighbourhood(models, station[:count], factors)
        if redundant > 0:
            repairs[0] += 1
            repairs[1] += redundant
        part = slice(run_begin[run], run_begin[run + 1])
        krige_cells(models, station[:count], factors, cells, which[part], lanes, mean[part], variance[part])


@compiled
def factor_stations(models: Models) -> Factors:
    """Factors of one neighbourhood of all stations."""
    n = models.points.shape[0]
    factors = make_factors(models, n)
    factor_neighbourhood(models, np.arange(n), factors)
    return factors


@compiled
def krige_stations(
    models: Models, factors: Factors, cells: Cells, which: np.ndarray, mean: np.ndarray, variance: np.ndarray
) -> None:
    """Krige the cells `which` from all stations, into `mean` (c, v, values) and `variance` (c, v) in that order."""
    n = models.points.shape[0]
    krige_cells(models, np.arange(n), factors, cells, which, make_lanes(models, n, LANES), mean, variance)
