"""What the bed needs to know of a target: flat arrays and who touches whom."""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import NDArray

__all__ = ["Bools", "Cells", "Floats", "Ints", "Run"]

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Ints = NDArray[np.int64]


class Run(Protocol):
    """A run of water along the outer edge; `texture.targets.openings.Opening` is one."""

    @property
    def cells(self) -> Ints:
        """Flat indices."""


class Cells(Protocol):
    """Cells with neighbours; `texture.targets.Target` is one. n counts all cells, land included."""

    @property
    def name(self) -> str:
        """File name or description, for messages."""

    @property
    def active(self) -> Bools:
        """True where the cell is water, shape (n,)."""

    @property
    def area_m2(self) -> Floats:
        """Area, shape (n,)."""

    @property
    def edges(self) -> NDArray[np.integer]:
        """Pairs of cells that share a side, shape (m, 2)."""

    def distance_m(self, pairs: NDArray[np.integer]) -> Floats:
        """Distance between the centres of pairs of cells, shape (m,); NaN where a position is unknown."""

    @property
    def openings(self) -> tuple[Run, ...]:
        """Runs of water along the outer edge, widest first."""

    @property
    def open_cells(self) -> Bools:
        """Water cells on the open boundary, river inlets left out, shape (n,)."""

    @property
    def side_cells(self) -> dict[str, Bools]:
        """Cells on the outer edge by compass side, each of shape (n,); a corner cell belongs to two."""

    @property
    def shape(self) -> tuple[int, ...]:
        """Rows and columns, or the number of cells of a mesh or a list of points."""
