"""Lines of a drafted recipe: the columns of a table with an example each, and the target."""

from __future__ import annotations

import json
import os
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from texture.recipe import COLUMN_ROLES
from texture.stations.columns import Column
from texture.stations.files import Cell, is_blank
from texture.stations.headings import PARTS, plain
from texture.stations.plausible import Extent
from texture.stations.sources import Source
from texture.stations.tables import Table
from texture.stations.where import shown

__all__ = ["bed_lines", "column_lines", "target_lines", "toml_path", "toml_text"]

_ORDER = {role: i for i, role in enumerate(COLUMN_ROLES)}


def column_lines(source: Source) -> list[str]:
    """One line for each column recognised, with an example; the others are listed."""
    lines: list[str] = []
    tables: list[tuple[Table, dict[str, Column]]] = [(source.table, source.columns)]
    if source.joined is not None:
        places = {r: c for r, c in source.joined.columns.items() if r not in source.columns}
        tables.append((source.joined.places, places))
    for table, columns in tables:
        sizes = {s.index for s in source.sizes} if table is source.table else set()
        for role, column in sorted(columns.items(), key=lambda item: _ORDER.get(item[0], len(_ORDER))):
            if role not in _ORDER:
                continue
            example = _example(table.columns[column.index])
            unit = (
                f"{column.unit}, "
                if column.unit and (role not in PARTS or column.unit in ("percent", "fraction", "g"))
                else ""
            )
            line = f"{role} = {toml_text(column.heading)}"
            if sum(plain(h) == plain(column.heading) for h in table.headings) > 1:
                line = f"# {line}  (this heading stands there more than once)"
            lines.append(f"{line:<40} # {unit}such as {example}")
        if sizes:
            names = ", ".join(table.headings[i] for i in sorted(sizes))
            lines.append(f"# size classes: {names}")
        used = {c.index for c in columns.values()} | sizes
        if table is source.table and source.joined is not None:
            used |= {source.columns["id"].index}
        idle = [h for i, h in enumerate(table.headings) if h and i not in used and (table is source.table or h != "")]
        idle = (
            [h for h in idle if not (table is not source.table and h == source.joined.columns["id"].heading)]
            if source.joined
            else idle
        )
        if idle:
            lines.append(
                f"# not used: {', '.join(idle)}  (a number among them can be mapped too: [[quantities]] with name, unit, column)"
            )
    return lines


def _example(cells: list[Cell]) -> str:
    return next((shown(c) for c in cells if not is_blank(c)), "nothing, it is empty")


def target_lines(extent: Extent | None, base: Path, grid: str | Path | None) -> list[str]:
    """The target: the grid that was given, else a raster around the stations."""
    if grid is not None:
        return ["[target]", f"file = {toml_path(Path(grid), base)}"]
    if extent is None:
        return [
            "# DOUBT: no positions were read to propose a raster around; give a grid file, or bounds, cell_size and crs",
            "[target]",
            '# file = "grid.nc"',
        ]
    west, south, east, north = extent
    code = (32600 if south + north >= 0 else 32700) + int(((west + east) / 2 + 180.0) // 6.0) + 1
    bounds, size = _metric_bounds(extent, code)
    return [
        "# No grid was given: a raster around the stations, in the UTM zone of their middle.",
        "[target]",
        f"bounds = [{', '.join(f'{b:.0f}.0' for b in bounds)}]  # west, south, east, north in metres",
        f"cell_size = {size:.0f}.0",
        f'crs = "EPSG:{code}"',
    ]


def bed_lines(rocky: int, deepest_m: Sequence[float]) -> list[str]:
    """What the rows tell of hard ground and of the bed below, as comments to switch on; nothing where they tell nothing.

    Parameters
    ----------
    rocky : int
        Rows that found hard ground.
    deepest_m : sequence of float
        Lower end of each interval of a core that begins below the surface and has fractions, metres below the bed.
    """
    lines: list[str] = []
    if rocky:
        lines += [
            "",
            f"# {rocky} row{'s' * (rocky != 1)} found hard ground: it is mapped as a probability, and from the threshold on nothing can erode.",
            "# [bed]",
            "# hard_ground_threshold = 0.5",
            '# hard_ground = "rock.geojson"  # polygons of rock, if there are any',
        ]
    if len(deepest_m):
        lines += [
            "",
            f"# {len(deepest_m)} interval{'s' * (len(deepest_m) != 1)} of cores lie below the surface, down to {max(deepest_m):g} m: a layer can be filled from them.",
            "# [[bed.layers]]",
            "# thickness_m = 0.1              # what the samples speak of",
            "# [[bed.layers]]",
            f"# thickness_m = {max(max(deepest_m) - 0.1, 0.1):.3g}",
            '# fill = "cores"',
        ]
    return lines


def _metric_bounds(extent: Extent, code: int) -> tuple[tuple[float, ...], float]:
    """Bounds in whole cells around an extent in degrees, and a cell size of about a hundredth of the longer side."""
    import pyproj

    transformer = pyproj.Transformer.from_crs(4326, code, always_xy=True)
    west, south, east, north = transformer.transform_bounds(*extent)
    side = max(east - west, north - south, 1000.0)
    step = 10.0 ** np.floor(np.log10(side / 100.0))
    size = float(step * min((1, 2, 5, 10), key=lambda m: abs(m * step - side / 100.0)))
    margin = 0.05 * side
    low = [np.floor((v - margin) / size) * size for v in (west, south)]
    high = [np.ceil((v + margin) / size) * size for v in (east, north)]
    return (low[0], low[1], high[0], high[1]), size


def toml_path(file: Path, base: Path) -> str:
    """A path as TOML, relative to the recipe's folder."""
    return toml_text(Path(os.path.relpath(file.absolute(), base.absolute())).as_posix())


def toml_text(text: str) -> str:
    """A text as TOML."""
    return json.dumps(text, ensure_ascii=False)  # a JSON string is a TOML basic string
