"""Draw the cells of a target on matplotlib axes: a notebook's first look, and the ground of every map."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from texture.targets.target import Target

__all__ = ["draw_cells", "plot_target"]

Floats = NDArray[np.float64]
MOST_CELLS_ACROSS = 600  # more would not be seen, and would make the file large
WATER, SEA_EDGE = "#9db8c4", "#b0413e"


def plot_target(target: Target, values: Floats | None = None, ax: Axes | None = None, label: str = "") -> Axes:
    """Draw values on the cells of a target, or the target itself with its open boundary.

    Parameters
    ----------
    target : Target
    values : float array, shape (n,), optional
        One for each cell; NaN and land stay empty. Without values water is drawn, and cells on the open boundary as dots.
    ax : matplotlib Axes, optional
        Made where none is given.
    label : str
        Of the colour bar.

    Returns
    -------
    matplotlib Axes
    """
    import matplotlib.pyplot as plt
    from cmcrameri import cm
    from matplotlib.colors import ListedColormap, Normalize

    if ax is None:
        _, ax = plt.subplots(layout="constrained")
    if values is None:
        draw_cells(ax, target, np.where(target.active, 0.0, np.nan), ListedColormap([WATER]), Normalize(0.0, 1.0))
        sea = np.flatnonzero(target.open_cells)
        if sea.size:
            ax.plot(target.longitude[sea], target.latitude[sea], ".", ms=3, color=SEA_EDGE, label="open boundary")
            ax.legend()
    else:
        shown = np.where(target.active, np.asarray(values, dtype=np.float64), np.nan)
        norm = Normalize(float(np.nanmin(shown)), float(np.nanmax(shown)))
        ax.figure.colorbar(draw_cells(ax, target, shown, cm.batlow, norm), ax=ax, label=label)
    ax.set_aspect(1.0 / np.cos(np.radians(float(np.nanmean(target.latitude)))))
    ax.set(xlabel="longitude, degrees", ylabel="latitude, degrees")
    return ax


def draw_cells(axis: Axes, target: Target, values: Floats, colour_map: Any, norm: Any) -> Any:
    """Draw each cell in its place: rows and columns as one sheet, faces as polygons, places as dots."""
    if len(target.shape) == 2:
        lon, lat, grid = _thinned(target, values)
        sheet = np.ma.masked_invalid(grid)
        return axis.pcolormesh(lon, lat, sheet, cmap=colour_map, norm=norm, rasterized=True)
    shown = np.flatnonzero(np.isfinite(values))
    if target.corners is None:
        lon, lat = target.longitude[shown], target.latitude[shown]
        return axis.scatter(lon, lat, c=values[shown], s=9, cmap=colour_map, norm=norm, rasterized=True)
    from matplotlib.collections import PolyCollection

    pieces = np.flatnonzero(np.isfinite(values[target.cell_of_piece]))
    polygons = np.stack(target.corners.of(pieces), axis=-1)
    drawn = PolyCollection(
        list(polygons), cmap=colour_map, norm=norm, edgecolors="face", linewidths=0.2, rasterized=True
    )
    drawn.set_array(values[target.cell_of_piece[pieces]])
    axis.add_collection(drawn)
    axis.autoscale_view()
    return drawn


def _thinned(target: Target, values: Floats) -> tuple[Floats, Floats, Floats]:
    """Vertices and values, every k-th cell where there are more than can be seen."""
    rows, columns = target.shape
    step = max(1, -(-max(rows, columns) // MOST_CELLS_ACROSS))
    grid = values.reshape(rows, columns)[::step, ::step]
    return _vertices(target, 0, step), _vertices(target, 1, step), grid


def _vertices(target: Target, axis: int, step: int) -> Floats:
    """Shared vertices from centres: drawing wants one array, not four corners a cell."""
    centres = (target.longitude, target.latitude)[axis].reshape(target.shape)[::step, ::step]
    if not np.isfinite(centres).all():  # drawing needs a position everywhere; what is missing is land
        known = np.flatnonzero(np.isfinite(centres.ravel()))
        from scipy.spatial import KDTree

        index = np.column_stack(np.unravel_index(np.arange(centres.size), centres.shape))
        centres = centres.ravel()[known[KDTree(index[known]).query(index)[1]]].reshape(centres.shape)
    if min(centres.shape) < 2:
        return np.asarray(np.pad(centres, ((0, 1), (0, 1)), mode="edge"))
    padded = np.pad(centres, 1, mode="reflect", reflect_type="odd")
    return np.asarray((padded[:-1, :-1] + padded[1:, :-1] + padded[:-1, 1:] + padded[1:, 1:]) / 4.0)
