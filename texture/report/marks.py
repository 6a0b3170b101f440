"""What lies on top of the explorable map: stations and hard ground with their values, the coast, the cell read-out."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.report.layers import NOTHING, STEPS, MapLayer
from texture.report.style import INK

if TYPE_CHECKING:
    import pandas as pd

    from texture.output.geotiff import PixelGrid
    from texture.result import Result

__all__ = ["add_coast", "add_hard_ground", "add_stations", "cell_hover"]

MOST_STATIONS = 3_000  # more cannot be told apart, and would make the page large
LONGEST_NAME = 60  # characters of an id or survey that a hover can show
MEASURED, IN_WORDS = "#ffffff", "#f2d37a"


def add_stations(plot: Any, result: Result, grid: PixelGrid) -> tuple[Any, str]:
    """Draw the stations with what a person asks of one: where it is from, what it says, how it was predicted.

    Returns
    -------
    glyph : the drawn dots
    note : str
        Empty, or how many of them are shown.
    """
    from bokeh.models import ColumnDataSource, HoverTool

    found = result.found
    observations = found.observations
    some, note = np.arange(observations.count), ""
    if observations.count > MOST_STATIONS:
        note = f"The map shows {MOST_STATIONS:,} of {observations.count:,} stations, taken evenly; stations.csv has them all."
        some = np.linspace(0, observations.count - 1, MOST_STATIONS).astype(int)
    chosen = found.stations.table.iloc[observations.rows[some]]
    parts = found.recipe.composition.parts
    measured, predicted = observations.fractions[some], found.validation.chosen.predicted[some]
    source = ColumnDataSource(
        {
            **_places(chosen, grid),
            "fill": np.where(observations.measured[some], MEASURED, IN_WORDS),
            **_source(chosen),
            "kind": [str(v).replace("_", " ") for v in chosen["kind"]],
            "measured": _shares(parts, measured),
            "predicted": _shares(parts, predicted),
            "error": _shares(parts, predicted - measured, sign=True),
            "flags": _flags(chosen, observations.measured[some]),
        }
    )
    dots = plot.scatter("x", "y", source=source, size=6, fill_color="fill", line_color=INK, line_width=0.8)
    labels = {
        "id": "station", "survey": "survey", "source": "row", "kind": "kind", "measured": "measured",
        "predicted": "held out, predicted", "error": "held-out error", "flags": "flags",
    }  # fmt: skip
    tooltips = [(label, f"@{name}") for name, label in labels.items()]
    plot.add_tools(HoverTool(renderers=[dots], tooltips=tooltips, description="Stations", attachment="above"))
    return dots, note


def add_hard_ground(plot: Any, result: Result, grid: PixelGrid) -> Any:
    """Draw a cross where a row tells of rock, stones or an empty grab; None where none does."""
    from bokeh.models import ColumnDataSource, HoverTool

    places = result.found.stations.hard_ground
    if not len(places):
        return None
    source = ColumnDataSource({**_places(places, grid), **_source(places)})
    crosses = plot.scatter("x", "y", source=source, marker="x", size=9, line_color="#ffffff", line_width=4.0)
    top = plot.scatter("x", "y", source=source, marker="x", size=9, line_color=INK, line_width=2.0)
    crosses.js_link("visible", top, "visible")
    tooltips = [("hard ground", "@id"), ("survey", "@survey"), ("row", "@source")]
    plot.add_tools(HoverTool(renderers=[top], tooltips=tooltips, description="Hard ground", attachment="above"))
    return crosses


def add_coast(plot: Any, result: Result, grid: PixelGrid) -> Any:
    """Draw the outline of the land polygons inside the image, simplified to half a pixel; None without polygons."""
    import pyproj
    import shapely

    land = result.found.target.land
    if land is None:
        return None
    west, south, east, north = result.found.target.bounds
    near = shapely.clip_by_rect(land, west - 0.1, south - 0.1, east + 0.1, north + 0.1)
    place = pyproj.Transformer.from_crs(4326, grid.crs, always_xy=True)
    metres = shapely.transform(near, lambda xy: np.column_stack(place.transform(xy[:, 0], xy[:, 1])))
    (rows, columns), (width, _, left, _, height, top) = grid.cell.shape, grid.transform
    outline = shapely.boundary(metres.simplify(abs(width) / 2.0))
    outline = shapely.clip_by_rect(outline, left, top + rows * height, left + columns * width, top)
    pieces = [shapely.get_coordinates(line) / 1000.0 for line in shapely.get_parts(outline) if not line.is_empty]
    if not pieces:
        return None
    return plot.multi_line([p[:, 0] for p in pieces], [p[:, 1] for p in pieces], line_color=INK, line_width=1.0)


def cell_hover(picture: Any, layers: list[MapLayer]) -> Any:
    """Show the value of every layer in the cell under the pointer."""
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


def _places(table: pd.DataFrame, grid: PixelGrid) -> dict[str, NDArray[np.float64]]:
    """Kilometres in the plot."""
    import pyproj

    place = pyproj.Transformer.from_crs(4326, grid.crs, always_xy=True)
    x, y = place.transform(table["longitude"].to_numpy(), table["latitude"].to_numpy())
    return {"x": np.asarray(x) / 1000.0, "y": np.asarray(y) / 1000.0}


def _source(table: pd.DataFrame) -> dict[str, list[str]]:
    return {
        "id": [_short(v) for v in table["id"]],
        "survey": [_short(v) for v in table["survey"]],
        "source": [
            f"{_short(f)}{', ' + _short(s) if s else ''}, row {r}"
            for f, s, r in zip(table["file"], table["sheet"], table["row"], strict=True)
        ],
    }


def _short(value: object) -> str:
    text = str(value)
    return text if len(text) <= LONGEST_NAME else text[: LONGEST_NAME - 1] + "…"


def _shares(parts: tuple[str, ...], values: NDArray[np.float64], sign: bool = False) -> list[str]:
    form = "+.2f" if sign else ".2f"
    return [
        ", ".join(f"{p} {v:{form}}" if np.isfinite(v) else f"{p} –" for p, v in zip(parts, row, strict=True))
        for row in values
    ]


def _flags(table: pd.DataFrame, measured: NDArray[np.bool_]) -> list[str]:
    """Words on stations that are not scored, or that no neighbour believes."""
    from texture.stations.outliers import FLAGGED_FROM

    size = table["held_out_z"].abs() if "held_out_z" in table.columns else np.zeros(len(table))
    far = [f"{z:.1f} standard errors off its neighbours" if z > FLAGGED_FROM else "" for z in size]
    words = ["" if known else "not scored" for known in measured]
    return [", ".join(text for text in both if text) or "none" for both in zip(far, words, strict=True)]


_READ = f"""
if (value === {NOTHING}) return "–";
const name = fact.names[String(value)];
if (name !== undefined) return name;
return (fact.low + (fact.high - fact.low) * value / {STEPS}).toPrecision(3);
"""
