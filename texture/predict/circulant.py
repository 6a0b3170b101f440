"""Prior fields on rasters in the plane by circulant embedding: exact covariances at the price of a few FFTs.

The covariances of a raster, continued periodically beyond it, are the eigenvalues' Fourier transform (Dietrich & Newsam
1997; Wood & Chan 1994); white noise times their roots, transformed, is a field. Real and imaginary part are two fields.
Noise of different columns is correlated by the residual correlation, so that two columns' coherence is the same at
every frequency, as in `texture.predict.spectral`.

Stations do not lie on nodes. Each gets its value given the 36 nodes around it and the stations before it that lie within
two steps (Vecchia 1988): nodes that near screen off what is farther.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from texture.compiling import compiled
from texture.predict.draws import LATTICE, STATIONS, colour, generator
from texture.structure.covariance import Covariance, CovarianceSet

__all__ = ["CirculantPrior", "Lattice", "find_lattice"]

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

MOST_NEGATIVE = 1e-3
"""Share of the eigenvalues' mass that may be negative and is left out; beyond it the embedding is refused."""
MOST_NODES = 1 << 24
"""Of the embedding: 0.27 GB for each column in work."""
FREE_NODES = 1 << 20
"""A small raster may have a torus of up to so many nodes: a range longer than the raster needs room."""
MOST_SPARSE = 4.0
"""Nodes for each point asked for beyond which a lattice is a poor way to reach them."""
AROUND, BEFORE = 6, 8
STATIONS_AT_ONCE = 1000
OFF_NODE = 1e-5
"""Share of a step by which a point may lie off its node: a thousandth of a metre on cells of a hundred metres."""


@dataclass(frozen=True)
class Lattice:
    """Evenly spaced nodes in the plane: node (j, i) is at ``origin + (i, j) * step``.

    Attributes
    ----------
    origin, step : pairs of float
        x before y, metres.
    shape : pair of int
        Rows (along y) and columns (along x).
    """

    origin: tuple[float, float]
    step: tuple[float, float]
    shape: tuple[int, int]

    def nodes_of(self, points: Array) -> Ints:
        """Flat number of the node that each point lies on, shape (m,)."""
        i = np.rint((points[:, 0] - self.origin[0]) / self.step[0]).astype(np.int64)
        j = np.rint((points[:, 1] - self.origin[1]) / self.step[1]).astype(np.int64)
        return np.asarray(j * self.shape[1] + i)


def find_lattice(points: Array, stations: Array) -> Lattice | None:
    """Lattice on which all of the points lie and which reaches three steps beyond every station; None where there is none.

    Parameters
    ----------
    points : float array, shape (m, 2)
        Such as the points inside a raster's cells, in any order, with holes.
    stations : float array, shape (n, 2)
    """
    if points.shape[1] != 2 or len(points) < 4:
        return None
    origin, step, shape = [], [], []
    for axis in range(2):
        found = _even_step(points[:, axis])
        if found is None:
            return None
        own = points[:, axis].min()
        low = min(0, int(np.floor((stations[:, axis].min() - own) / found)))
        high = max(np.rint((points[:, axis].max() - own) / found), np.ceil((stations[:, axis].max() - own) / found))
        origin.append(float(own + (low - 3) * found))
        step.append(found)
        shape.append(int(high) - low + 7)
    if shape[0] * shape[1] > MOST_SPARSE * len(points) + 10_000:
        return None
    return Lattice((origin[0], origin[1]), (step[0], step[1]), (shape[1], shape[0]))


def _even_step(values: Array) -> float | None:
    """Step of which all values are whole multiples apart, None where there is none."""
    ordered = np.unique(values)
    gaps = np.diff(ordered)
    extent = float(ordered[-1] - ordered[0])
    if extent <= 0.0:
        return None
    rough = gaps[gaps > 1e-7 * extent].min(initial=np.inf)  # smaller gaps are rounding of one coordinate
    count = round(extent / rough) if np.isfinite(rough) else 0
    if count < 1:
        return None
    # The smallest gap is off by rounding; the extent is a whole number of steps, and known far better.
    step = extent / count
    off = (ordered - ordered[0]) / step
    return step if np.abs(off - np.rint(off)).max() <= OFF_NODE else None


class CirculantPrior:
    """Prior fields of all columns on a lattice and at stations; made by `CirculantPrior.make`."""

    def __init__(
        self, structure: CovarianceSet, lattice: Lattice, roots: list[Array], stations: Array, seed: int
    ) -> None:
        self.structure, self.lattice, self.seed = structure, lattice, seed
        self._roots = roots
        self._colour = colour(structure.correlation)
        self._near = [_neighbourhoods(c, lattice, stations) for c in structure]
        self._count = len(stations)

    @classmethod
    def make(cls, structure: CovarianceSet, lattice: Lattice, stations: Array, seed: int = 1) -> CirculantPrior | None:
        """Prepare the embedding; None where a part of its eigenvalues is too negative on every torus that fits."""
        most = min(MOST_NODES, max(16 * lattice.shape[0] * lattice.shape[1], FREE_NODES))
        for wide in (1.0, 2.0, 4.0, 8.0, 16.0, 32.0):
            shape = _torus(structure, lattice, wide)
            if shape[0] * shape[1] > most:
                return None
            roots = []
            for c in structure:
                root = _root(c, lattice, shape)
                if root is None:
                    break
                roots.append(root)
            if len(roots) == len(structure):
                return cls(structure, lattice, roots, stations, seed)
        return None

    def pair(self, number: int) -> Array:
        """Fields of members 2 * number + 1 and + 2 on the lattice, shape (2, v, rows, columns)."""
        from scipy import fft

        rows, columns = self.lattice.shape
        rng = generator(self.seed, number, LATTICE)
        shape = self._roots[0].shape
        noise = [rng.standard_normal(shape) + 1j * rng.standard_normal(shape) for _ in self._roots]
        out = np.empty((2, len(noise), rows, columns))
        for v, root in enumerate(self._roots):
            mixed = sum(self._colour[v, b] * noise[b] for b in range(v + 1))
            field = fft.fft2(root * mixed, overwrite_x=True, workers=1)[:rows, :columns]
            out[0, v], out[1, v] = field.real, field.imag
        return out

    def at_stations(self, fields: Array, member: int) -> Array:
        """Values of one member's fields (v, rows, columns) at the stations, shape (n, v)."""
        drawn = generator(self.seed, member, STATIONS).standard_normal((self._count, len(self._near))) @ self._colour.T
        out = np.empty((self._count, len(self._near)))
        for v, (nodes, before, weight, spread) in enumerate(self._near):
            _in_turn(fields[v].ravel(), nodes, before, weight, spread, np.ascontiguousarray(drawn[:, v]), out, v)
        return out


def _torus(structure: CovarianceSet, lattice: Lattice, wide: float) -> tuple[int, int]:
    """Size of the embedding: correlations across its seam are below 1e-4, or those of the raster doubled."""
    from scipy import fft

    reach = max((c.range_m / min(c.axis_scales or (1.0,)) for c in structure), default=0.0) * 3.1
    size = []
    for nodes, step in zip(lattice.shape, (lattice.step[1], lattice.step[0]), strict=True):
        pad = min(nodes, int(np.ceil(reach / step))) if wide == 1.0 else int(nodes * (wide - 1.0))
        size.append(int(fft.next_fast_len(nodes + max(pad, 1))))
    return size[0], size[1]


def _root(c: Covariance, lattice: Lattice, shape: tuple[int, int]) -> Array | None:
    """Roots of the eigenvalues over the number of nodes, None where too much of their mass is negative."""
    from scipy import fft

    from texture.structure.compiled import covariance_matrix

    def lags(size: int, step: float) -> Array:
        index = np.arange(size)
        return np.where(index <= size // 2, index, index - size) * step

    dy, dx = lags(shape[0], lattice.step[1]), lags(shape[1], lattice.step[0])
    sill = sum(s.sill for s in c.structures)
    if sill == 0.0:
        return np.zeros(shape)
    values = np.empty(shape)
    for j, y in enumerate(dy):
        h = np.linalg.norm(c.metric(np.column_stack([dx, np.full(shape[1], y)])), axis=1)
        values[j] = covariance_matrix(c.packed, 0.0, h[None, :])[0]
    # With anisotropy the seam sees both signs of a lag: their mean keeps the torus symmetric.
    values = 0.5 * (values + np.roll(values[::-1, ::-1], 1, axis=(0, 1)))
    eigen = fft.fft2(values, workers=1).real
    negative = -eigen[eigen < 0.0].sum()
    if negative > MOST_NEGATIVE * np.abs(eigen).sum():
        return None
    eigen = np.maximum(eigen, 0.0)
    return np.asarray(np.sqrt(eigen * (sill / eigen.sum())))


def _neighbourhoods(c: Covariance, lattice: Lattice, stations: Array) -> tuple[Ints, Ints, Array, Array]:
    """For each station its nodes (n, 36), stations before it (n, 8; -1 where fewer), their weights, and the sd left."""
    from scipy.spatial import cKDTree

    n = len(stations)
    at = (stations - np.array(lattice.origin)) / np.array(lattice.step)
    corner = np.floor(at).astype(np.int64) - (AROUND // 2 - 1)
    i, j = (a.ravel() for a in np.meshgrid(np.arange(AROUND), np.arange(AROUND)))
    nodes = (corner[:, 1:] + j) * lattice.shape[1] + corner[:, :1] + i
    before = np.full((n, BEFORE), -1, dtype=np.int64)
    for station, others in enumerate(cKDTree(at).query_ball_point(at, 2.0)):
        earlier = np.array([o for o in others if o < station], dtype=np.int64)
        if earlier.size:
            order = np.argsort(((at[earlier] - at[station]) ** 2).sum(axis=1), kind="stable")[:BEFORE]
            before[station, : len(order)] = earlier[order]
    weight, spread = np.zeros((n, AROUND**2 + BEFORE)), np.zeros(n)
    if not c.structures:
        return nodes, before, weight, spread
    place = np.stack([corner[:, :1] + i, corner[:, 1:] + j], axis=-1)
    off = np.abs(place - at[:, None]).max(axis=2)
    exact = off.min(axis=1) <= OFF_NODE
    weight[exact, off[exact].argmin(axis=1)] = 1.0
    known = (before >= 0).sum(axis=1)
    for count in np.unique(known[~exact]):
        group = np.flatnonzero(~exact & (known == count))
        for start in range(0, len(group), STATIONS_AT_ONCE):
            some = group[start : start + STATIONS_AT_ONCE]
            around = place[some] * np.array(lattice.step) + np.array(lattice.origin)
            everything = np.concatenate([around, stations[before[some, :count]], stations[some, None]], axis=1)
            solved, left = _conditional(c, everything)
            weight[some, : AROUND**2 + count], spread[some] = solved, left
    return nodes, before, weight, spread


def _conditional(c: Covariance, places: Array) -> tuple[Array, Array]:
    """Weights of all places but the last (g, k, 2) in the last one's conditional mean, and its standard deviation."""
    from texture.structure.compiled import covariance_matrix

    g, k, _ = places.shape
    own = c.metric(places.reshape(g * k, 2)).reshape(g, k, 2)
    distance = np.sqrt(((own[:, :, None] - own[:, None]) ** 2).sum(axis=3))
    matrix = covariance_matrix(c.packed, 0.0, np.ascontiguousarray(distance.reshape(g * k, k))).reshape(g, k, k)
    sill = sum(s.sill for s in c.structures)
    # Nodes a small share of the range apart nearly determine one another: the diagonal is lifted by 1e-10.
    known = matrix[:, :-1, :-1] + 1e-10 * sill * np.eye(k - 1)
    solved = np.linalg.solve(known, matrix[:, :-1, -1:])[:, :, 0]
    return solved, np.sqrt(np.maximum(sill - (solved * matrix[:, :-1, -1]).sum(axis=1), 0.0))


@compiled
def _in_turn(
    field: np.ndarray,
    nodes: np.ndarray,
    before: np.ndarray,
    weight: np.ndarray,
    spread: np.ndarray,
    drawn: np.ndarray,
    out: np.ndarray,
    column: int,
) -> None:
    """Values at stations one after the other, each given its nodes and the stations before it, into a column of `out`."""
    around = nodes.shape[1]
    for s in range(nodes.shape[0]):
        total = spread[s] * drawn[s]
        for k in range(around):
            total += weight[s, k] * field[nodes[s, k]]
        for k in range(before.shape[1]):
            if before[s, k] >= 0:
                total += weight[s, around + k] * out[before[s, k], column]
        out[s, column] = total


def pairs_of(members: Sequence[int]) -> list[int]:
    """Pairs of fields that hold these members (counted from 1), each once."""
    return sorted({(m - 1) // 2 for m in members})
