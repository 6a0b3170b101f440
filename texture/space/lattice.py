"""A square lattice over the working plane: the nodes that paths through water run along."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["MOST_NODES", "Lattice"]

Floats = NDArray[np.float64]

MOST_NODES = 100_000
"""Nodes of a lattice at most; it is made coarser until it has no more. Ways through 90,000 of them take 14 s on one core."""


@dataclass(frozen=True)
class Lattice:
    """Evenly spaced nodes, row by row from the south-west.

    Examples
    --------
    >>> lattice = Lattice.covering(np.array([[0.0, 0.0], [1000.0, 500.0]]), 100.0)
    >>> lattice.shape, lattice.nodes[0].tolist()
    ((10, 15), [-200.0, -200.0])
    """

    west_m: float
    south_m: float
    step_m: float
    shape: tuple[int, int]

    @classmethod
    def covering(cls, points: Floats, step_m: float, most: int = MOST_NODES) -> Lattice:
        """A lattice around points (n, 2), of a step of `step_m` or of more where it would have more than `most` nodes."""
        low, high = points.min(axis=0), points.max(axis=0)
        while True:
            columns, rows = (int(np.ceil((high[k] - low[k]) / step_m)) + 5 for k in (0, 1))
            if columns * rows <= most:
                return cls(float(low[0] - 2.0 * step_m), float(low[1] - 2.0 * step_m), step_m, (rows, columns))
            step_m *= max(1.01, float(np.sqrt(columns * rows / most)))

    @property
    def count(self) -> int:
        """Number of nodes."""
        return self.shape[0] * self.shape[1]

    @property
    def x(self) -> Floats:
        """Of the columns, rising."""
        return np.asarray(self.west_m + self.step_m * np.arange(self.shape[1]))

    @property
    def y(self) -> Floats:
        """Of the rows, rising."""
        return np.asarray(self.south_m + self.step_m * np.arange(self.shape[0]))

    @property
    def nodes(self) -> Floats:
        """All nodes, shape (count, 2)."""
        x, y = np.meshgrid(self.x, self.y)
        return np.column_stack([x.ravel(), y.ravel()])
