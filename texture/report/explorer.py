"""The map to explore: layers to choose, pan and zoom, the values under the pointer, stations on top.

Drawn by Bokeh, all inside the page: no request leaves the machine.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.report.layers import NOTHING, STEPS, MapLayer, map_layers
from texture.report.style import INK, LAND

if TYPE_CHECKING:
    from texture.output.geotiff import PixelGrid
    from texture.result import Result

__all__ = ["Explorer", "explorer"]

MOST_PIXELS = 120_000  # a layer then weighs 0.16 MB in the page, whatever the grid
MOST_STATIONS = 3_000  # more cannot be told apart, and would make the page large


class Explorer:
    """Parts of the page: scripts for its head, one element for its body, and what was left out."""

    def __init__(self, scripts: list[str], body: str, note: str) -> None:
        self.scripts, self.body, self.note = scripts, body, note


def explorer(result: Result) -> Explorer | None:
    """Make the map; None for a list of places, which has no cells to show."""
    target = result.found.target
    if target.corners is None:
        return None
    from bokeh.embed import components
    from bokeh.resources import Resources

    grid, size_m = _pixels(result)
    layers = map_layers(result)
    figure, note = _figure(result, grid, size_m, layers)
    script, body = components(figure)
    inside = script[script.index(">") + 1 : script.rindex("</script>")]
    library = Resources(mode="inline", components=["bokeh", "bokeh-widgets"], minified=True)
    return Explorer([*library.js_raw, inside], body, note)


def _pixels(result: Result) -> tuple[PixelGrid, float]:
    """Pixels coarse enough for a page: the map's own where they are few."""
    from texture.output.geotiff import pixel_grid

    target = result.found.target
    if target.kind == "raster" and target.crs.is_projected:
        grid = pixel_grid(target)
        step = int(np.ceil(np.sqrt(grid.cell.size / MOST_PIXELS)))
        return _thinned(grid, max(step, 1)), abs(grid.transform[0]) * max(step, 1)
    area = float(target.area_m2.sum())
    own = float(np.sqrt(np.median(target.area_m2[target.active])))
    size = max(own, np.sqrt(2.0 * area / MOST_PIXELS))
    return pixel_grid(target, float(size), resample=True), float(size)


def _thinned(grid: PixelGrid, step: int) -> PixelGrid:
    """Every step-th pixel, from the middle of the first step."""
    width, _, west, _, height, north = grid.transform
    cell = grid.cell[step // 2 :: step, step // 2 :: step]
    return replace(grid, cell=cell, transform=(width * step, 0.0, west, 0.0, height * step, north))


def _figure(result: Result, grid: PixelGrid, size_m: float, layers: list[MapLayer]) -> tuple[Any, str]:
    from bokeh.layouts import column
    from bokeh.models import ColumnDataSource, CustomJS, FixedTicker, LinearColorMapper
    from bokeh.models.annotations import ColorBar
    from bokeh.models.widgets import Div, Select

    rows, columns = grid.cell.shape
    west, north = grid.transform[2], grid.transform[5]
    height = abs(grid.transform[4])
    images = {layer.key: [_image(layer, grid)] for layer in layers}
    image = ColumnDataSource({**images, "shown": images[layers[0].key]})
    first = layers[0]
    mapper = LinearColorMapper(palette=first.palette, low=-0.5, high=STEPS + 0.5, high_color="rgba(0,0,0,0)")
    plot = _frame(west, north, columns * size_m, rows * height)
    picture = plot.image(
        image="shown", source=image, x=west / 1000, y=(north - rows * height) / 1000, dw=columns * size_m / 1000,
        dh=rows * height / 1000, color_mapper=mapper, level="image",
    )  # fmt: skip
    dots, note = _stations(result, grid)
    circles = plot.scatter("x", "y", source=dots, size=6, fill_color="fill", line_color=INK, line_width=0.8)
    plot.add_tools(_cell_hover(picture, layers), _station_hover(circles))
    bar = ColorBar(
        color_mapper=mapper, ticker=FixedTicker(ticks=_ticks()), formatter=_formatter(first), title=first.title
    )
    plot.add_layout(bar, "right")
    legend = Div(text=_legend(first), sizing_mode="stretch_width")
    options: list[Any] = [(layer.key, layer.title) for layer in layers]
    choice = Select(title="Layer of the map", value=first.key, options=options)
    facts = {
        layer.key: {
            "title": layer.title, "palette": layer.palette if layer.names else None, "low": layer.low,
            "high": layer.high, "legend": _legend(layer),
        }
        for layer in layers
    }  # fmt: skip
    choice.js_on_change(
        "value",
        CustomJS(
            args={
                "picture": picture,
                "mapper": mapper,
                "bar": bar,
                "legend": legend,
                "facts": facts,
                "even": first.palette,
            },
            code=_SWITCH,
        ),
    )
    return column(choice, legend, plot, sizing_mode="stretch_width"), note


def _image(layer: MapLayer, grid: PixelGrid) -> NDArray[np.uint8]:
    """Rows from south to north, as the plot wants them."""
    shown = np.where(grid.cell >= 0, layer.codes[grid.cell], NOTHING).astype(np.uint8)
    return np.ascontiguousarray(shown[::-1])


def _frame(west: float, north: float, width_m: float, height_m: float) -> Any:
    from bokeh.models.annotations import ScaleBar
    from bokeh.plotting import figure

    plot = figure(
        width=1000,
        height=int(np.clip(900 * height_m / width_m + 60, 320, 760)),
        match_aspect=True,
        tools="pan,wheel_zoom,box_zoom,reset,save",
        active_scroll=None,
        toolbar_location="above",
        sizing_mode="scale_width",
        x_axis_label="easting, km",
        y_axis_label="northing, km",
        background_fill_color=LAND,
        output_backend="canvas",
    )
    plot.grid.visible = False
    plot.toolbar.logo = None
    plot.add_layout(ScaleBar(range=plot.x_range, unit="km", location="bottom_left", background_fill_alpha=0.7))
    return plot


def _stations(result: Result, grid: PixelGrid) -> tuple[Any, str]:
    """Stations with what a person asks of one: where it is from, what it says, how it was predicted."""
    import pyproj
    from bokeh.models import ColumnDataSource

    found = result.found
    table, observations = found.stations.table, found.observations
    place = pyproj.Transformer.from_crs(4326, grid.crs, always_xy=True)
    rows = observations.rows
    note = ""
    if rows.size > MOST_STATIONS:
        note = f"The map shows {MOST_STATIONS:,} of {rows.size:,} stations, drawn evenly; stations.csv has them all."
        rows = rows[np.linspace(0, rows.size - 1, MOST_STATIONS).astype(int)]
    at = {int(r): i for i, r in enumerate(observations.rows)}
    index = np.array([at[int(r)] for r in rows])
    chosen = table.iloc[rows]
    x, y = place.transform(chosen["longitude"].to_numpy(), chosen["latitude"].to_numpy())
    parts = found.recipe.composition.parts
    measured, predicted = observations.fractions[index], found.validation.chosen.predicted[index]

    def shares(values: NDArray[np.float64]) -> list[str]:
        return [
            ", ".join(f"{p} {v:.2f}" if np.isfinite(v) else f"{p} –" for p, v in zip(parts, row, strict=True))
            for row in values
        ]

    source = ColumnDataSource(
        {
            "x": np.asarray(x) / 1000,
            "y": np.asarray(y) / 1000,
            "fill": np.where(observations.measured[index], "#ffffff", "#f2d37a"),
            "id": [str(v)[:60] for v in chosen["id"]],
            "survey": [str(v)[:60] for v in chosen["survey"]],
            "source": [
                f"{f}{', ' + s if s else ''}, row {r}"
                for f, s, r in zip(chosen["file"], chosen["sheet"], chosen["row"], strict=True)
            ],
            "kind": [str(v).replace("_", " ") for v in chosen["kind"]],
            "measured": shares(measured),
            "predicted": shares(predicted),
        }
    )
    return source, note


def _cell_hover(picture: Any, layers: list[MapLayer]) -> Any:
    from bokeh.models import CustomJSHover, HoverTool

    facts = {
        layer.key: {"low": layer.low, "high": layer.high, "names": {str(k): v for k, v in layer.names.items()}}
        for layer in layers
    }
    formatters: dict[str, Any] = {
        f"@{layer.key}": CustomJSHover(args={"fact": facts[layer.key]}, code=_READ) for layer in layers
    }
    tooltips = [(layer.title, f"@{layer.key}{{custom}}") for layer in layers]
    return HoverTool(
        renderers=[picture],
        tooltips=tooltips,
        formatters=formatters,
        description="Values of a cell",
        attachment="right",
    )


def _station_hover(circles: Any) -> Any:
    from bokeh.models import HoverTool

    names = ("id", "survey", "source", "kind", "measured", "predicted")
    labels = {"predicted": "held out, predicted"}
    return HoverTool(
        renderers=[circles],
        tooltips=[(labels.get(n, n), f"@{n}") for n in names],
        description="Stations",
        attachment="above",
    )


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

_READ = f"""
if (value === {NOTHING}) return "–";
const name = fact.names[String(value)];
if (name !== undefined) return name;
return (fact.low + (fact.high - fact.low) * value / {STEPS}).toPrecision(3);
"""
