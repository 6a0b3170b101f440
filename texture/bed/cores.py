"""A layer below the first as cores found it: the map moved by a difference that fades with the way from them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from texture.bed.cells import Bools, Floats
from texture.composition import LogRatio
from texture.composition.closure import close

__all__ = ["CoreLayer", "moved_fractions", "surface_coordinates"]


LEAST = 1e-9
"""Of a part, where the detection limit leaves a coordinate unknown."""


@dataclass(frozen=True, eq=False)
class CoreLayer:
    """How a layer differs from the map.

    Attributes
    ----------
    logratio : LogRatio
        Whose coordinates the difference is in.
    shift : float array, shape (n, d)
        Layer less map, in log-ratio coordinates; 0 where no core speaks.
    sampled : bool array, shape (n,)
        Cells that a core reaches.
    cores : int
        How many tell of the layer.
    covered : float
        Share of the layer's thickness that they cover, in the mean.
    """

    logratio: LogRatio
    shift: Floats
    sampled: Bools
    cores: int = 0
    covered: float = 0.0

    def line(self) -> str:
        """What the cores cover, in words."""
        return f"{self.cores:,} core{'s' * (self.cores != 1)} that cover{'s' * (self.cores == 1)} {100 * self.covered:.0f} % of its thickness on average"

    def share_sampled(self, active: Bools, area_m2: Floats) -> float:
        """Share of the water area that a core reaches."""
        return float(area_m2[active & self.sampled].sum() / area_m2[active].sum())


def surface_coordinates(fractions: Floats, logratio: LogRatio) -> Floats:
    """Log-ratio coordinates of a map, shape (n, d), known everywhere.

    Where both sides of a coordinate lie below the detection limit it is taken from what they are, and is 0 where both are absent:
    a layer is told from the map by their difference, so that only has to be the same number for both.
    """
    fine = logratio if logratio.kind == "shares" else replace(logratio, detection_limit=LEAST)
    coordinates = (logratio if logratio.detection_limit > 0.0 else fine).forward(fractions)
    unknown = np.isnan(coordinates).any(axis=1)
    if unknown.any():
        small = fine.forward(fractions[unknown])
        coordinates[unknown] = np.nan_to_num(np.where(np.isnan(coordinates[unknown]), small, coordinates[unknown]))
    return coordinates


def moved_fractions(fractions: Floats, shift: Floats, logratio: LogRatio) -> Floats:
    """Move fractions in log-ratio coordinates.

    Parts below the detection limit are moved as if they stood at its replacement, and what was replaced is taken back after that: a
    shift of 0 returns the very same numbers, zeros included.

    Parameters
    ----------
    fractions : float array, shape (n, parts)
        Summing to 1, without NaN.
    shift : float array, shape (n, d)
    logratio : LogRatio

    Returns
    -------
    float array, shape (n, parts)
        Sums to 1 within 1e-12.

    Examples
    --------
    >>> tree = LogRatio(("mud", "sand", "gravel"))
    >>> mud = np.array([[0.5, 0.4, 0.1]])
    >>> moved_fractions(mud, np.array([[-np.log(4.0), 0.0]]), tree).round(3)  # a quarter of the odds of mud
    array([[0.2 , 0.64, 0.16]])
    """
    coordinates = surface_coordinates(fractions, logratio)
    moved = fractions + (logratio.inverse(coordinates + shift) - logratio.inverse(coordinates))
    if (moved < 0.0).any():
        below = (moved < 0.0).any(axis=1)
        moved[below] = close(np.maximum(moved[below], 0.0))
    return np.asarray(moved)
