"""Maps of the target: parts, classes and evidence, with coast, scale bar and stations."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.report.style import INK, LAND, PART_MAP, new_figure, styled

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from texture.targets import Target

__all__ = ["EVIDENCE_COLOURS", "Layer", "draw_maps"]

Floats = NDArray[np.float64]
EVIDENCE_COLOURS = {
    0: (235, 232, 225),
    1: (63, 107, 125),
    2: (222, 170, 96),
    3: (122, 90, 140),
    4: (200, 196, 186),
    5: (140, 150, 90),
    6: (176, 65, 62),
}
MOST_CELLS_ACROSS = 600  # more would not be seen, and would make the file large; the caption says so


@dataclass(frozen=True, eq=False)
class Layer:
    """One map: values over all cells, NaN or -1 where there is none.

    `names` and `colours` (red, green, blue of 0–255) make it a map of classes: values are their keys.
    """

    title: str
    values: NDArray[np.floating]
    label: str = "fraction of dry mass"
    limits: tuple[float, float] = (0.0, 1.0)
    names: Mapping[int, str] = field(default_factory=dict)
    colours: Mapping[int, tuple[int, int, int]] = field(default_factory=dict)


def draw_maps(
    target: Target, layers: list[Layer], stations: tuple[Floats, Floats] | None = None, columns: int = 2
) -> Figure:
    """Draw layers side by side on one scale of distance.

    Parameters
    ----------
    target : Target
    layers : list of Layer
    stations : pair of float arrays, optional
        Longitude and latitude, drawn as small rings.
    columns : int
        Maps in a row.
    """
    rows = -(-len(layers) // columns)
    middle = float(np.nanmean(target.latitude))
    stretch = 1.0 / np.cos(np.radians(middle))
    wide = np.ptp(target.longitude[target.active]) / stretch
    tall = np.ptp(target.latitude[target.active])
    width = 4.9
    height = min(max(0.68 * width * tall / wide, 1.6), 6.5) + 0.65  # the map beside its bar, and room for labels
    with styled():
        figure = new_figure(width * columns, height * rows)
        axes = figure.subplots(rows, columns, squeeze=False, sharex=True, sharey=True)
        for axis, layer in zip(axes.flat, layers, strict=False):
            _draw(figure, axis, target, layer)
            if stations is not None:
                axis.plot(*stations, "o", mfc="none", mec="white", mew=0.9, ms=3.0, ls="none")
                axis.plot(*stations, "o", mfc="none", mec=INK, mew=0.4, ms=3.4, ls="none")
            axis.set_aspect(stretch)
            axis.set_title(layer.title)
        for axis in axes.flat[len(layers) :]:
            axis.set_visible(False)
        for axis in axes[-1]:
            axis.set_xlabel("longitude, degrees")
        for axis in axes[:, 0]:
            axis.set_ylabel("latitude, degrees")
        _scale_bar(axes.flat[0], middle)
    return figure


def _draw(figure: Figure, axis: Axes, target: Target, layer: Layer) -> None:
    import cmcrameri.cm as cm
    from matplotlib.colors import BoundaryNorm, ListedColormap, Normalize

    axis.set_facecolor(LAND)
    values = np.where(target.active, layer.values, np.nan)
    if layer.names:
        used = sorted({int(v) for v in values[np.isfinite(values)]})
        values = _positions(values, used)
        colours = ListedColormap([tuple(c / 255 for c in layer.colours[v]) for v in used])
        mesh = _patches(axis, target, values, colours, BoundaryNorm(np.arange(len(used) + 1) - 0.5, len(used)))
        bar = figure.colorbar(mesh, ax=axis, shrink=0.9, pad=0.02, ticks=range(len(used)))
        bar.ax.set_yticklabels([layer.names[v] for v in used])
        bar.ax.tick_params(length=0)
    else:
        colour_map: Any = getattr(cm, PART_MAP)
        mesh = _patches(axis, target, values, colour_map, Normalize(*layer.limits))
        figure.colorbar(mesh, ax=axis, shrink=0.9, pad=0.02, label=layer.label)


def _positions(values: Floats, used: list[int]) -> Floats:
    """Position of each class among those used, NaN where there is none."""
    known = np.isfinite(values)
    result = np.full(values.shape, np.nan)
    result[known] = np.searchsorted(used, values[known].astype(int))
    return result


def _patches(axis: Axes, target: Target, values: Floats, colour_map: Any, norm: Any) -> Any:
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


def _scale_bar(axis: Axes, latitude: float) -> None:
    """Draw a bar of a round length and an arrow to the north in the first map's corner."""
    west, east = axis.get_xlim()
    south, north = axis.get_ylim()
    degree_m = 111_195.0 * np.cos(np.radians(latitude))  # of longitude on the sphere; a bar needs no better
    want = (east - west) * degree_m / 5.0
    power = 10.0 ** np.floor(np.log10(want))
    length_m = max(step * power for step in (1, 2, 5) if step * power <= want)
    x, y = west + 0.05 * (east - west), south + 0.06 * (north - south)
    axis.plot([x, x + length_m / degree_m], [y, y], color=INK, lw=2.5, solid_capstyle="butt", clip_on=False)
    label = f"{length_m / 1000:g} km" if length_m >= 1000 else f"{length_m:g} m"
    axis.text(x + length_m / degree_m / 2, y + 0.02 * (north - south), label, ha="center", va="bottom")
    foot, head = y + 0.13 * (north - south), y + 0.25 * (north - south)
    axis.annotate("", (x, head), (x, foot), arrowprops={"arrowstyle": "-|>", "color": INK, "lw": 1.2})
    axis.text(x, head, "N", ha="center", va="bottom")
