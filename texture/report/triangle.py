"""The triangle of mud, sand and gravel: where the samples lie in it, and where the map does."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.report.style import INK, PART_MAP, QUIET, new_figure, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["draw_triangles", "in_triangle"]

Floats = NDArray[np.float64]
HEIGHT = np.sqrt(3.0) / 2.0
MOST_CELLS = 1_000_000  # more cannot be told apart in the triangle; they are taken evenly


def in_triangle(fractions: Floats) -> Floats:
    """Places in a triangle of side 1: mud at the lower left, sand at the lower right, gravel at the top.

    Parameters
    ----------
    fractions : float array, shape (n, 3)
        Mud, sand, gravel; rows that are not fully known give NaN.

    Returns
    -------
    float array, shape (n, 2)

    Examples
    --------
    >>> import numpy as np
    >>> in_triangle(np.array([[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.5, 0.5, 0.0]]))
    array([[0. , 0. ],
           [1. , 0. ],
           [0.5, 0. ]])
    """
    sand, gravel = fractions[:, 1], fractions[:, 2]
    return np.column_stack([sand + gravel / 2.0, HEIGHT * gravel]) + 0.0 * fractions[:, :1]


def draw_triangles(parts: tuple[str, ...], samples: Floats, cells: Floats, area: Floats) -> Figure:
    """Draw the samples as dots and the map's cells as shares of the area, side by side.

    Parameters
    ----------
    parts : tuple of 3 str
    samples : float array, shape (n, 3)
    cells : float array, shape (m, 3)
    area : float array, shape (m,)
        Of each cell, in any one unit.
    """
    from matplotlib.colors import LogNorm

    with styled():
        figure = new_figure(9.0, 4.1)
        left, right = figure.subplots(1, 2)
        known = in_triangle(samples)
        known = known[np.isfinite(known).all(axis=1)]
        frame(left, parts, f"{len(known):,} samples with all parts known")
        left.plot(known[:, 0], known[:, 1], "o", ms=3, mfc=INK, mec="none", alpha=0.5)
        step = max(1, -(-len(cells) // MOST_CELLS))
        where, weight = in_triangle(cells[::step]), area[::step]
        frame(right, parts, "cells of the map")
        import cmcrameri.cm as cm

        colours: Any = getattr(cm, PART_MAP)
        drawn = right.hexbin(
            where[:, 0], where[:, 1], C=100.0 * weight / weight.sum(), reduce_C_function=np.sum, gridsize=40,
            extent=(0.0, 1.0, 0.0, 1.0), cmap=colours, norm=LogNorm(), linewidths=0.0, zorder=0,
        )  # fmt: skip
        figure.colorbar(drawn, ax=right, shrink=0.8, label="percent of the water area")
    return figure


def frame(axis: Axes, parts: tuple[str, ...], title: str) -> None:
    """Draw the three sides, lines at every fifth, and the names of the corners."""
    corners = np.array([[0.0, 0.0], [1.0, 0.0], [0.5, HEIGHT], [0.0, 0.0]])
    for share in (0.2, 0.4, 0.6, 0.8):
        for part in range(3):
            ends = np.full((2, 3), 0.0)
            ends[:, part] = share
            ends[0, (part + 1) % 3], ends[1, (part + 2) % 3] = 1.0 - share, 1.0 - share
            axis.plot(*in_triangle(ends).T, color=QUIET, lw=0.4, zorder=1)
        on_sides = in_triangle(
            np.array([[1.0 - share, share, 0.0], [0.0, 1.0 - share, share], [share, 0.0, 1.0 - share]])
        )
        sides = ((0.0, -0.02, "center", "top"), (0.02, 0.0, "left", "center"), (-0.02, 0.0, "right", "center"))
        for (x, y), (right, up, horizontal, vertical) in zip(on_sides, sides, strict=True):
            axis.text(x + right, y + up, f"{100 * share:.0f}", ha=horizontal, va=vertical, fontsize=7)
    axis.plot(*corners.T, color=INK, lw=1.0, zorder=2)
    axis.text(-0.03, -0.05, f"{parts[0]}", ha="right", va="top")
    axis.text(1.03, -0.05, f"{parts[1]}", ha="left", va="top")
    axis.text(0.5, HEIGHT + 0.03, f"{parts[2]}, percent", ha="center", va="bottom")
    axis.set(xlim=(-0.15, 1.15), ylim=(-0.12, HEIGHT + 0.12), aspect="equal", title=title)
    axis.set_axis_off()
