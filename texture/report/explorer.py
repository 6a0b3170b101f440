"""The map to explore: layers to choose, pan and zoom, the values under the pointer, stations on top.

Drawn by Bokeh, all inside the page: no request leaves the machine.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.report.layers import NOTHING, STEPS, MapLayer, map_layers
from texture.report.marks import add_coast, add_hard_ground, add_stations, cell_hover
from texture.report.style import INK, LAND

if TYPE_CHECKING:
    from texture.output.geotiff import PixelGrid
    from texture.result import Result

__all__ = ["Explorer", "explorer"]

MOST_PIXELS = 120_000  # a layer then weighs 0.16 MB in the page, whatever the grid


class Explorer:
    """Parts of the page: scripts for its head, one element for its body, and what was left out."""

    def __init__(self, scripts: list[str], body: str, notes: list[str]) -> None:
        self.scripts, self.body, self.notes = scripts, body, notes


def explorer(result: Result) -> Explorer | None:
    """Make the map; None for a list of places, which has no cells to show."""
    target = result.found.target
    if target.corners is None:
        return None
    from bokeh.embed import components
    from bokeh.resources import Resources

    grid, size_m, notes = _pixels(result)
    figure, note = _figure(result, grid, size_m)
    script, body = components(figure)
    inside = script[script.index(">") + 1 : script.rindex("</script>")]
    library = Resources(mode="inline", components=["bokeh", "bokeh-widgets"], minified=True)
    return Explorer([*library.js_raw, inside], body, [*notes, *([note] if note else [])])


def _pixels(result: Result) -> tuple[PixelGrid, float, list[str]]:
    """Pixels coarse enough for a page, and a word on it where cells are left out."""
    from texture.output.geotiff import pixel_grid

    target = result.found.target
    if target.kind == "raster" and target.crs.is_projected:
        grid = pixel_grid(target)
        step = max(int(np.ceil(np.sqrt(grid.cell.size / MOST_PIXELS))), 1)
        return _thinned(grid, step), abs(grid.transform[0]) * step, _thin_note(step > 1, target.n_cells)
    area = float(target.area_m2.sum())
    own = float(np.sqrt(np.median(target.area_m2[target.active])))
    size = max(own, np.sqrt(2.0 * area / MOST_PIXELS))
    return pixel_grid(target, float(size), resample=True), float(size), _thin_note(size > own, target.n_cells)


def _thin_note(thinned: bool, cells: int) -> list[str]:
    if not thinned:
        return []
    return [
        f"The grid has {cells:,} cells, more than a page can carry: the map to explore shows an even choice of them. The files have them all."
    ]


def _thinned(grid: PixelGrid, step: int) -> PixelGrid:
    """Every step-th pixel, from the middle of the first step."""
    width, _, west, _, height, north = grid.transform
    cell = grid.cell[step // 2 :: step, step // 2 :: step]
    return replace(grid, cell=cell, transform=(width * step, 0.0, west, 0.0, height * step, north))


def _figure(result: Result, grid: PixelGrid, size_m: float) -> tuple[Any, str]:
    from bokeh.layouts import column
    from bokeh.models import ColumnDataSource, FixedTicker, LinearColorMapper
    from bokeh.models.annotations import ColorBar
    from bokeh.models.widgets import Div

    layers = map_layers(result)
    first = layers[0]
    rows, columns = grid.cell.shape
    west, north = grid.transform[2], grid.transform[5]
    height = abs(grid.transform[4])
    images = {layer.key: [_image(layer, grid)] for layer in layers}
    image = ColumnDataSource({**images, "shown": images[first.key]})
    mapper = LinearColorMapper(palette=first.palette, low=-0.5, high=STEPS + 0.5, high_color="rgba(0,0,0,0)")
    plot = _frame(west, north, columns * size_m, rows * height)
    picture = plot.image(
        image="shown", source=image, x=west / 1000, y=(north - rows * height) / 1000, dw=columns * size_m / 1000,
        dh=rows * height / 1000, color_mapper=mapper, level="image",
    )  # fmt: skip
    plot.add_tools(cell_hover(picture, layers))
    marks: dict[str, Any] = {"coast": add_coast(plot, result, grid)}
    note = ""
    if result.found.recipe.report.stations == "shown":
        marks["stations"], note = add_stations(plot, result, grid)
        marks["hard ground"] = add_hard_ground(plot, result, grid)
    bar = ColorBar(
        color_mapper=mapper,
        ticker=FixedTicker(ticks=_ticks()),
        formatter=_formatter(first),
        title=first.title,
        height=14,
    )
    plot.add_layout(bar, "below")
    legend = Div(text=_legend(first), sizing_mode="stretch_width")
    choice = _layer_choice(layers, picture, mapper, bar, legend)
    return column(choice, _mark_choice(marks), legend, plot, sizing_mode="stretch_width"), note


def _layer_choice(layers: list[MapLayer], picture: Any, mapper: Any, bar: Any, legend: Any) -> Any:
    """A list of the layers; what it switches runs in the page."""
    from bokeh.models import CustomJS
    from bokeh.models.widgets import Select

    options: list[Any] = [(layer.key, layer.title) for layer in layers]
    choice = Select(title="Layer of the map", value=layers[0].key, options=options)
    facts = {
        layer.key: {
            "title": layer.title, "palette": layer.palette if layer.names else None, "low": layer.low,
            "high": layer.high, "legend": _legend(layer),
        }
        for layer in layers
    }  # fmt: skip
    things = {
        "picture": picture,
        "mapper": mapper,
        "bar": bar,
        "legend": legend,
        "facts": facts,
        "even": layers[0].palette,
    }
    choice.js_on_change("value", CustomJS(args=things, code=_SWITCH))
    return choice


def _mark_choice(marks: dict[str, Any]) -> Any:
    """A tick for each thing drawn on top."""
    from bokeh.models import CustomJS
    from bokeh.models.widgets import CheckboxGroup

    there = {name: drawn for name, drawn in marks.items() if drawn is not None}
    ticks = CheckboxGroup(labels=list(there), active=list(range(len(there))), inline=True)
    code = "drawn.forEach((glyph, i) => { glyph.visible = cb_obj.active.includes(i); });"
    ticks.js_on_change("active", CustomJS(args={"drawn": list(there.values())}, code=code))
    return ticks


def _image(layer: MapLayer, grid: PixelGrid) -> NDArray[np.uint8]:
    """Rows from south to north, as the plot wants them."""
    shown = np.where(grid.cell >= 0, layer.codes[grid.cell], NOTHING).astype(np.uint8)
    return np.ascontiguousarray(shown[::-1])


def _frame(west: float, north: float, width_m: float, height_m: float) -> Any:
    from bokeh.models.annotations import Label, ScaleBar
    from bokeh.plotting import figure

    plot = figure(
        width=1000,
        height=int(np.clip(900 * height_m / width_m + 60, 320, 760)),
        match_aspect=True,
        tools="pan,wheel_zoom,box_zoom,reset,save",
        active_scroll=None,
        toolbar_location="above",
        sizing_mode="scale_width",
        min_height=430,  # on a phone
        x_axis_label="easting, km",
        y_axis_label="northing, km",
        background_fill_color=LAND,
        output_backend="canvas",
    )
    plot.grid.visible = False
    plot.toolbar.logo = None
    plot.add_layout(
        Label(x=12, y=46, x_units="screen", y_units="screen", text="↑ N", text_color=INK, text_font_style="bold")
    )
    plot.add_layout(ScaleBar(range=plot.x_range, unit="km", location="bottom_left", background_fill_alpha=0.7))
    return plot


def _ticks() -> list[float]:
    return [STEPS * k / 5 for k in range(6)]


def _formatter(layer: MapLayer) -> Any:
    from bokeh.models import CustomJSTickFormatter

    return CustomJSTickFormatter(
        args={"low": layer.low, "high": layer.high}, code=f"return (low + (high - low) * tick / {STEPS}).toPrecision(3)"
    )


def _legend(layer: MapLayer) -> str:
    """Words and colours of a layer of classes; empty for others."""
    import html

    return "".join(
        f'<span style="white-space:nowrap;margin-right:1em"><span style="display:inline-block;width:.9em;height:.9em;'
        f'background:{layer.palette[code]};border:1px solid {INK}"></span> {html.escape(words)}</span> '
        for code, words in layer.names.items()
    )


_SWITCH = """
const fact = facts[cb_obj.value];
mapper.palette = fact.palette === null ? even : fact.palette;
const data = picture.data_source.data;
picture.data_source.data = {...data, shown: data[cb_obj.value]};
legend.text = fact.legend;
bar.visible = fact.palette === null;
bar.title = fact.title;
bar.formatter.args = {low: fact.low, high: fact.high};
"""
