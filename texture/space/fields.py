"""Values between places where they are known: bilinear on a grid, from the nearest four elsewhere.

Both answer with a value everywhere and say how they came by it, so that whoever asks can tell a value from a guess.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError

__all__ = ["BESIDE", "BETWEEN", "MISSING", "Field", "Grid", "Projected", "Scatter"]

Floats = NDArray[np.float64]
States = NDArray[np.int8]

BETWEEN, BESIDE, MISSING = 0, 1, 2
"""How a value was come by: from all that surround the place; from some, or the nearest within one cell; the nearest, too
far off to count."""


class Field(Protocol):
    """What can be asked for a value anywhere."""

    def at(self, points: Floats) -> tuple[Floats, States]:
        """Values at points (m, 2), never NaN, and how each was come by; shapes (m,)."""
        ...


@dataclass(frozen=True, eq=False)
class Grid:
    """Values on the crossings of two axes, bilinear between them.

    Parameters
    ----------
    x, y : float arrays, shape (columns,) and (rows,)
        Rising or falling, not necessarily evenly spaced.
    values : float array, shape (rows, columns)
        NaN where there is none.

    Notes
    -----
    Where some of the four values around a place are missing, those that are there share its weights; where all are, or beyond the
    grid, the nearest value serves, `BESIDE` within one cell and `MISSING` further off.

    Examples
    --------
    >>> Grid(np.array([0.0, 1.0]), np.array([0.0, 1.0]), np.array([[0.0, 1.0], [2.0, 3.0]])).at(np.array([[0.5, 0.5]]))[0].tolist()
    [1.5]
    """

    x: Floats
    y: Floats
    values: Floats

    def __post_init__(self) -> None:
        for name in ("x", "y"):
            axis = getattr(self, name)
            steps = np.diff(axis)
            if axis.size < 2 or not (np.isfinite(axis).all() and ((steps > 0).all() or (steps < 0).all())):
                raise TargetError(f"{name} axis of a grid: expected at least two numbers that rise or fall throughout")
        if not np.isfinite(self.values).any():
            raise TargetError("a grid of values has none, expected at least one")

    @cached_property
    def _rising(self) -> tuple[Floats, Floats, Floats]:
        x, y, values = self.x, self.y, self.values
        if x[0] > x[-1]:
            x, values = x[::-1], values[:, ::-1]
        if y[0] > y[-1]:
            y, values = y[::-1], values[::-1]
        return x, y, np.ascontiguousarray(values)

    @cached_property
    def _tree(self) -> tuple[Any, Floats]:
        """k-d tree of the places with a value, in cells."""
        from scipy.spatial import cKDTree

        row, column = np.nonzero(np.isfinite(self._rising[2]))
        return cKDTree(np.column_stack([column, row])), self._rising[2][row, column]

    def at(self, points: Floats) -> tuple[Floats, States]:
        """Values at points (m, 2), never NaN, and how each was come by."""
        x, y, values = self._rising
        column, inside_x = _in_cells(points[:, 0], x)
        row, inside_y = _in_cells(points[:, 1], y)
        j, i = np.clip(column.astype(np.int64), 0, x.size - 2), np.clip(row.astype(np.int64), 0, y.size - 2)
        u, v = np.clip(column - j, 0.0, 1.0), np.clip(row - i, 0.0, 1.0)
        total, weight = np.zeros(len(points)), np.zeros(len(points))
        whole = inside_x & inside_y
        for di, dj, w in ((0, 0, (1 - v) * (1 - u)), (0, 1, (1 - v) * u), (1, 0, v * (1 - u)), (1, 1, v * u)):
            value = values[i + di, j + dj]
            known = np.isfinite(value) & (w > 0.0)
            total += np.where(known, w * np.nan_to_num(value), 0.0)
            weight += np.where(known, w, 0.0)
        whole &= weight > 1.0 - 1e-9
        within = inside_x & inside_y & (weight > 0.0)
        result = np.divide(total, weight, out=np.zeros(len(points)), where=weight > 0.0)
        state = np.where(whole, BETWEEN, BESIDE).astype(np.int8)
        rest = np.flatnonzero(~within)
        if rest.size:
            tree, known_values = self._tree
            distance, nearest = tree.query(np.column_stack([column, row])[rest])
            result[rest] = known_values[nearest]
            state[rest] = np.where(distance <= 1.0, BESIDE, MISSING)
        return result, state


def _in_cells(position: Floats, axis: Floats) -> tuple[Floats, NDArray[np.bool_]]:
    """Position along an axis in cells, and whether it lies between its ends; beyond them cells go on as the last."""
    cell = np.interp(position, axis, np.arange(axis.size, dtype=np.float64))
    before, after = position < axis[0], position > axis[-1]
    cell[before] = (position[before] - axis[0]) / (axis[1] - axis[0])
    cell[after] = axis.size - 1 + (position[after] - axis[-1]) / (axis[-1] - axis[-2])
    return cell, ~(before | after)


@dataclass(frozen=True, eq=False)
class Scatter:
    """Values at scattered places, such as the cells of a curved grid: the four nearest by inverse squared distance.

    Parameters
    ----------
    points : float array, shape (n, 2), metres
    values : float array, shape (n,)
        Finite.
    spacing_m : float array, shape (n,)
        Side of the cell that each value stands for: how far it reaches.

    Examples
    --------
    >>> field = Scatter(np.array([[0.0, 0.0], [100.0, 0.0]]), np.array([1.0, 3.0]), np.array([100.0, 100.0]))
    >>> [a.tolist() for a in field.at(np.array([[50.0, 0.0], [0.0, 0.0], [500.0, 0.0]]))]
    [[2.0, 1.0, 3.0], [0, 0, 2]]
    """

    points: Floats
    values: Floats
    spacing_m: Floats

    def __post_init__(self) -> None:
        if not len(self.values):
            raise TargetError("scattered values: found none, expected at least one")

    @cached_property
    def _tree(self) -> Any:
        from scipy.spatial import cKDTree

        return cKDTree(self.points)

    def at(self, points: Floats) -> tuple[Floats, States]:
        """Values at points (m, 2), never NaN, and how each was come by."""
        k = min(4, len(self.values))
        distance, near = self._tree.query(points, k=np.arange(1, k + 1))
        first = near[:, 0]
        reach = self.spacing_m[first]
        # Beyond what the nearest one stands for, others do not count: they may lie across land.
        floor = np.maximum(distance[:, :1], 1e-9 * reach[:, None])
        weight = np.where(
            distance <= np.maximum(1.5 * reach[:, None], distance[:, :1]),
            (floor / np.maximum(distance, floor)) ** 2,
            0.0,
        )
        exact = distance[:, 0] <= 1e-9 * reach
        result = np.where(exact, self.values[first], (weight * self.values[near]).sum(axis=1) / weight.sum(axis=1))
        inside, beside = distance[:, 0] <= 0.75 * reach, distance[:, 0] <= 1.5 * reach
        state = np.where(inside, BETWEEN, np.where(beside, BESIDE, MISSING)).astype(np.int8)
        result[~beside] = self.values[first[~beside]]
        return result, state


@dataclass(frozen=True, eq=False)
class Projected:
    """A field that lives in coordinates of its own.

    Parameters
    ----------
    field : Field
    project : callable
        From points (m, 2) of the working plane to the field's coordinates.
    """

    field: Field
    project: Callable[[Floats], Floats]

    def at(self, points: Floats) -> tuple[Floats, States]:
        """Values at points of the plane, never NaN, and how each was come by."""
        return self.field.at(self.project(points))
