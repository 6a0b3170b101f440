"""Maps of the target: parts, classes and evidence, with coast, scale bar and stations."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.report.style import INK, LAND, PART_MAP, new_figure, styled
from texture.targets.drawing import draw_cells

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from texture.targets import Target

__all__ = ["EVIDENCE_COLOURS", "Layer", "draw_maps", "draw_residuals"]

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
    target: Target,
    layers: list[Layer],
    stations: tuple[Floats, Floats] | None = None,
    columns: int = 2,
    width: float = 4.9,
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
    width : float
        Of one map with its bar, inches.
    """
    rows = -(-len(layers) // columns)
    middle, stretch, height = _proportions(target, width)
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
        _dress(axes, middle)
    return figure


def draw_residuals(
    target: Target, place: tuple[Floats, Floats], residuals: Floats, parts: tuple[str, ...], width: float = 4.0
) -> Figure:
    """Draw the held-out error of each station where it lies: one map a part, symmetric about zero.

    Parameters
    ----------
    target : Target
    place : pair of float arrays, shape (n,)
        Longitude and latitude.
    residuals : float array, shape (n, parts)
        Prediction minus measurement, NaN where there is none.
    parts : tuple of str
    width : float
        Of one map, inches.
    """
    import cmcrameri.cm as cm
    from matplotlib.colors import ListedColormap, Normalize

    middle, stretch, height = _proportions(target, width)
    known = np.abs(residuals[np.isfinite(residuals)])
    most = max(0.1, float(np.quantile(known, 0.98))) if known.size else 0.1
    colours: Any = cm.vik
    with styled():
        figure = new_figure(width * len(parts), height + 0.45)
        axes = figure.subplots(1, len(parts), squeeze=False, sharex=True, sharey=True)
        sea = np.where(target.active, 0.0, np.nan)
        for axis, part, i in zip(axes.flat, parts, range(len(parts)), strict=True):
            axis.set_facecolor(LAND)
            draw_cells(axis, target, sea, ListedColormap(["white"]), Normalize(0.0, 1.0))
            some = np.flatnonzero(np.isfinite(residuals[:, i]))
            some = some[np.argsort(np.abs(residuals[some, i]), kind="stable")]  # the large ones on top
            drawn = axis.scatter(
                place[0][some], place[1][some], c=residuals[some, i], s=14, cmap=colours,
                norm=Normalize(-most, most), edgecolors=INK, linewidths=0.3,
            )  # fmt: skip
            axis.set_aspect(stretch)
            axis.set_title(part)
        _dress(axes, middle)
        figure.colorbar(
            drawn, ax=axes, orientation="horizontal", shrink=0.5, aspect=40, pad=0.04, extend="both",
            label="held-out prediction minus measurement, fraction of dry mass",
        )  # fmt: skip
    return figure


def _proportions(target: Target, width: float) -> tuple[float, float, float]:
    """Middle latitude, stretch of its degrees, and height in inches of a map of that width beside its bar."""
    middle = float(np.nanmean(target.latitude))
    stretch = 1.0 / np.cos(np.radians(middle))
    wide = np.ptp(target.longitude[target.active]) / stretch
    tall = np.ptp(target.latitude[target.active])
    ratio = tall / wide if wide > 0.0 else 1.0
    return middle, stretch, min(max(0.68 * width * ratio, 1.6), 6.5) + 0.65


def _dress(axes: Any, middle: float) -> None:
    """Label the outer axes, and put scale bar and north arrow into the first map."""
    for axis in axes[-1]:
        axis.set_xlabel("longitude, degrees")
    for axis in axes[:, 0]:
        axis.set_ylabel("latitude, degrees")
    _scale_bar(axes.flat[0], middle)


def _draw(figure: Figure, axis: Axes, target: Target, layer: Layer) -> None:
    import cmcrameri.cm as cm
    from matplotlib.colors import BoundaryNorm, ListedColormap, Normalize

    axis.set_facecolor(LAND)
    values = np.where(target.active, layer.values, np.nan)
    if layer.names:
        used = sorted({int(v) for v in values[np.isfinite(values)]})
        values = _positions(values, used)
        colours = ListedColormap([tuple(c / 255 for c in layer.colours[v]) for v in used])
        mesh = draw_cells(axis, target, values, colours, BoundaryNorm(np.arange(len(used) + 1) - 0.5, len(used)))
        bar = figure.colorbar(mesh, ax=axis, shrink=0.9, pad=0.02, ticks=range(len(used)))
        bar.ax.set_yticklabels([layer.names[v] for v in used])
        bar.ax.tick_params(length=0)
    else:
        colour_map: Any = getattr(cm, PART_MAP)
        mesh = draw_cells(axis, target, values, colour_map, Normalize(*layer.limits))
        figure.colorbar(mesh, ax=axis, shrink=0.9, pad=0.02, label=layer.label)


def _positions(values: Floats, used: list[int]) -> Floats:
    """Position of each class among those used, NaN where there is none."""
    known = np.isfinite(values)
    result = np.full(values.shape, np.nan)
    result[known] = np.searchsorted(used, values[known].astype(int))
    return result


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
