"""The padded coarse cells along the open boundary, so that a run neither erodes nor blooms at its edge."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from texture.bed.cells import Bools, Cells, Floats
from texture.errors import BedError
from texture.recipe import Rim

__all__ = ["blend", "open_boundary", "rim_weight", "water_distance"]

PROFILES: dict[str, Callable[[Floats], Floats]] = {
    "cosine": lambda t: 0.5 * (1.0 + np.cos(np.pi * t)),
    "linear": lambda t: 1.0 - t,
    "step": lambda t: np.ones_like(t),
}


def rim_weight(cells: Cells, rim: Rim, start: Bools | None = None) -> Floats:
    """Weight of the rim's bed in each cell.

    Parameters
    ----------
    cells : Cells
    rim : Rim
        Sides, width (in cells or metres) and profile.
    start : bool array, shape (n,), optional
        Cells that a line or polygon file names, where the recipe's `sides` is one; the width counts from them.

    Returns
    -------
    float array, shape (n,)
        Exactly 1 in the cells of the open edge, falling to exactly 0 at the width, which is measured from
        the centres of those cells to other centres, through water from side to side of cells. A width of 6
        cells touches six rows of cells. 0 on land.

    Raises
    ------
    BedError
        If there is no open boundary on the sides asked for, or the rim would cover all water that it reaches.
    """
    in_metres = rim.width_m is not None
    width = float(rim.width_m if rim.width_m is not None else rim.width_cells or 0)
    if start is None:
        if not (rim.sides == "open" or isinstance(rim.sides, tuple)):
            raise BedError(f"rim.sides is a file ({rim.sides.name}); its cells have to be given as well")
        start = open_boundary(cells, rim.sides, rim.leave_out)
    distance = water_distance(cells, start, in_metres, limit=width)
    inside = distance < width
    # No way leads from the rim into other water: ponds that the sea does not reach do not count.
    if not (inside[cells.edges].any(axis=1) & (cells.active & ~inside)[cells.edges].any(axis=1)).any():
        unit = "m" if in_metres else "cells"
        raise BedError(
            f"rim: a width of {width:g} {unit} covers all water that the sea reaches in {cells.name}; "
            "make it narrower, or name fewer sides"
        )
    weight = np.zeros(distance.size)
    weight[inside] = PROFILES[rim.profile](distance[inside] / width)
    return weight


def open_boundary(cells: Cells, sides: str | tuple[str, ...], leave_out: tuple[int, ...] = ()) -> Bools:
    """Cells that the rim starts from: the whole open boundary, or its cells on compass sides.

    A corner cell belongs to both of its sides; river inlets belong to none. Openings whose number from 1, widest first, is in
    `leave_out` are struck out.

    Raises
    ------
    BedError
        If none of the cells asked for is open water, or there is no opening of such a number.
    """
    opened = cells.open_cells & cells.active
    for number in leave_out:
        if number > len(cells.openings):
            listed = "; ".join(f"{i}, {opening}" for i, opening in enumerate(cells.openings, start=1))
            raise BedError(f"rim.leave_out: {cells.name} has no opening {number}; it has {listed}")
        opened[cells.openings[number - 1].cells] = False
    if not opened.any():
        raise BedError(
            f"rim: {cells.name} has no open boundary: no water on its outer edge is wider than a river inlet; "
            "leave [rim] out, or lower target.inlet_width_m"
        )
    if sides == "open":
        return opened
    by_side = cells.side_cells
    chosen = np.zeros(opened.size, dtype=bool)
    for side in sides:
        found = opened & by_side[side]
        if not found.any():
            known = [name for name, mask in by_side.items() if (mask & opened).any()]
            raise BedError(
                f"rim.sides: the {side} side of {cells.name} has no open water; open sides: {', '.join(known)}"
            )
        chosen |= found
    return chosen


def water_distance(cells: Cells, start: Bools, in_metres: bool, limit: float = np.inf) -> Floats:
    """Shortest way through water from the start cells, from side to side of cells.

    Parameters
    ----------
    cells : Cells
    start : bool array, shape (n,)
        Water cells at distance 0.
    in_metres : bool
        Metres between centres, or steps from cell to cell.
    limit : float
        Search no farther than this.

    Returns
    -------
    float array, shape (n,)
        Infinite on land, out of reach, and beyond `limit`.
    """
    # Rings of cells outwards from the start, not a search through a graph of all cells: a rim is narrow, and at 1e7
    # cells that graph alone takes 1.7 GB.
    distance = np.full(start.size, np.inf)
    distance[start & cells.active] = 0.0
    front = start & cells.active
    a, b = cells.edges[:, 0], cells.edges[:, 1]
    while front.any():
        touched = np.flatnonzero(front[a] | front[b])
        ends = cells.edges[touched]
        length = cells.distance_m(ends) if in_metres else np.ones(touched.size)
        front = np.zeros(start.size, dtype=bool)
        for origin, reached in (ends.T, ends.T[::-1]):
            longer = distance[origin] + length
            better = cells.active[reached] & (longer < distance[reached]) & (longer <= limit)
            np.minimum.at(distance, reached[better], longer[better])
            front[reached[better]] = True
    return distance


def blend(fraction: Floats, weight: Floats, rim_fraction: Floats) -> Floats:
    """Mix the rim's bed in, (1 − w) · estimate + w · rim; sums stay what they were.

    Parameters
    ----------
    fraction : float array, shape (k, layer, n)
    weight : float array, shape (n,)
    rim_fraction : float array, shape (k,) or (k, layer, n)

    Returns
    -------
    float array, shape (k, layer, n)
    """
    rim = rim_fraction[:, None, None] if rim_fraction.ndim == 1 else rim_fraction
    return np.asarray((1.0 - weight) * fraction + weight * rim)
