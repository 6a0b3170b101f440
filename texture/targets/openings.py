"""Where the outer edge of a grid is open water, and which openings are river inlets."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["COMPASS", "Opening", "Run", "compass_names", "sort_openings"]

COMPASS = ("north", "east", "south", "west")

Run = tuple[NDArray[np.int64], float, tuple[str, ...]]


@dataclass(frozen=True, eq=False)
class Opening:
    """One unbroken run of water along the outer edge.

    Attributes
    ----------
    cells : int array
        Flat indices, each once, in order along the edge.
    length_m : float
        Length of the run along the edge on the ellipsoid.
    sides : tuple of str
        Compass sides that it touches, by the direction of their outward face.
    inlet : bool
        True where the run is too narrow to be sea: a river or a channel that enters the grid.
    """

    cells: NDArray[np.int64]
    length_m: float
    sides: tuple[str, ...]
    inlet: bool

    def __str__(self) -> str:
        kind = "river inlet, not rimmed" if self.inlet else "open sea"
        cells = f"{self.cells.size} cell{'s' * (self.cells.size != 1)}"
        return f"{' and '.join(self.sides)}: {cells}, {self.length_m / 1000:.1f} km, {kind}"


def sort_openings(runs: Iterable[Run], inlet_width_m: float | None) -> tuple[Opening, ...]:
    """Make openings of runs, widest first.

    A run narrower than `inlet_width_m` is an inlet. By default a tenth of the widest run: on a coastal
    grid the sea is one long run, and a river enters through a few cells.
    """
    ordered = sorted(runs, key=lambda run: -run[1])
    if not ordered:
        return ()
    limit = ordered[0][1] / 10.0 if inlet_width_m is None else inlet_width_m
    return tuple(Opening(cells, length, sides, inlet=length < limit) for cells, length, sides in ordered)


def compass_names(east: NDArray[np.float64], north: NDArray[np.float64]) -> NDArray[np.int64]:
    """Return the number (of `COMPASS`) of the compass point nearest to each direction.

    >>> [COMPASS[k] for k in compass_names(np.array([0.1, 3.0, -1.0]), np.array([1.0, -1.0, -0.2]))]
    ['north', 'east', 'west']
    """
    azimuth = np.degrees(np.arctan2(east, north)) % 360.0
    return np.round(azimuth / 90.0).astype(np.int64) % 4
