"""Where a method sees places: the coordinates between which distance is plain, and the columns that its mean follows."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from texture.space.covariates import Covariates

__all__ = ["PLANE", "Ground", "Seen", "Space"]

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Seen:
    """Places as a method sees them.

    Attributes
    ----------
    points : float array, shape (m, d)
        Coordinates, finite.
    drift : float array, shape (m, p), or None
        Drift columns, finite.
    missing : bool array, shape (m,)
        True where a covariate had no value near enough, or a place no way through water, and the nearest stands in.
    """

    points: Floats
    drift: Floats | None
    missing: Bools


class Ground(Protocol):
    """What turns points of the plane into points between which plain distance is the one that is meant."""

    def at(self, points: Floats) -> Floats:
        """Coordinates of points (m, 2) of the plane, shape (m, k)."""
        ...

    def apart(self, points: Floats) -> Bools:
        """Which of the points have no place of their own in it; `at` gives them the nearest."""
        ...


@dataclass(frozen=True, eq=False)
class Space:
    """The working plane, or what takes its place, with covariates beside it.

    Parameters
    ----------
    ground : Ground or None
        What the two coordinates of the plane are replaced by (paths through water); None leaves them.
    axes : Covariates or None
        Covariates that are coordinates, each with its own range.
    drift : tuple of str
        Columns that the mean follows linearly: "x", "y" and names in `columns`.
    columns : Covariates or None
        Covariates among the drift.
    notes : tuple of str
        What a reader should know of it.
    fell_back : str
        Why the plane stands in for what the recipe asked for; empty where it does not.
    """

    ground: Ground | None = None
    axes: Covariates | None = None
    drift: tuple[str, ...] = ()
    columns: Covariates | None = None
    notes: tuple[str, ...] = ()
    fell_back: str = ""

    @property
    def axis_names(self) -> tuple[str, ...]:
        """Names of the covariates that are coordinates."""
        return () if self.axes is None else self.axes.names

    @property
    def flat(self) -> bool:
        """Whether its points are those of the plane."""
        return self.ground is None and self.axes is None

    def own_range_axes(self, dimensions: int) -> tuple[int, ...]:
        """Which of so many coordinates are covariates: the last ones."""
        return tuple(range(dimensions - len(self.axis_names), dimensions))

    def at(self, points: Floats) -> Seen:
        """Places (m, d) of the working plane as the method sees them."""
        coordinates = points if self.ground is None else self.ground.at(points)
        missing = np.zeros(len(points), dtype=bool) if self.ground is None else self.ground.apart(points)
        if self.axes is not None:
            values, guessed = self.axes.at(points)
            coordinates, missing = np.column_stack([coordinates, values]), missing | guessed
        drift = None
        if self.drift:
            named = {"x": points[:, 0], "y": points[:, 1]}
            if self.columns is not None:
                values, guessed = self.columns.at(points)
                missing |= guessed
                named |= dict(zip(self.columns.names, values.T, strict=True))
            drift = np.column_stack([named[name] for name in self.drift])
        return Seen(np.ascontiguousarray(coordinates), drift, missing)


PLANE = Space()
"""The working plane as it is."""
