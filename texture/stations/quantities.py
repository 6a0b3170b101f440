"""Further numbers that ride along with the samples: read from a column, or medians of the size curves."""

from __future__ import annotations

import difflib
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.composition import Scale, percentiles_from_weights
from texture.errors import SampleError
from texture.recipe import Quantity, Samples
from texture.stations.audit import AuditLog
from texture.stations.cells import Numbers, Reading, read_numbers, unreadable_hint
from texture.stations.files import Cell
from texture.stations.headings import plain
from texture.stations.limits import ABOUT, OF_LIMIT
from texture.stations.shares import Classes
from texture.stations.sources import Source
from texture.stations.tables import Table
from texture.stations.where import Where

__all__ = ["check_found", "merge_quantities", "quantities_of", "width_name"]

FloatArray = npt.NDArray[np.float64]


def width_name(name: str) -> str:
    """Column of half widths: rounding, or half of a range, in the quantity's unit."""
    return f"{name}_half_width"


def quantities_of(
    source: Source,
    block: Samples,
    quantities: Sequence[Quantity],
    median: FloatArray,
    classes: Classes | None,
    audit: AuditLog,
    notes: list[str],
) -> dict[str, FloatArray]:
    """Values of each quantity, and their half widths, for the rows of a table; NaN where it says nothing.

    Parameters
    ----------
    source, block : Source, Samples
        The table, and the block of the recipe, whose `quantities` name headings before the quantity's own `column`.
    quantities : sequence of Quantity
    median : float array, shape (n,)
        Medians in phi that the laboratory gives.
    classes : Classes, optional
        Size classes of the rows, where the table has them.
    audit, notes

    Raises
    ------
    SampleError
        If the block names a heading that stands nowhere.
    """
    columns: dict[str, FloatArray] = {}
    for quantity in quantities:
        if quantity.curve is not None:
            value, half = _medians(median, classes), np.zeros(len(median))
        else:
            value, half = _column(source, block, quantity, audit, notes)
        columns[quantity.name], columns[width_name(quantity.name)] = value, np.where(np.isnan(value), np.nan, half)
    return columns


def merge_quantities(
    rows: pd.DataFrame, stations: pd.DataFrame, member: npt.NDArray[np.int64], quantities: Sequence[Quantity]
) -> pd.DataFrame:
    """Give each station the mean of what its rows say of each quantity, slices of a core by their thickness.

    Rows that stand in two spreadsheets say it twice and the mean is the same; a row that says nothing does not count.

    Parameters
    ----------
    rows : DataFrame
        Rows that made the stations, with top_m and thickness_m.
    stations : DataFrame
        As merged; changed in a copy.
    member : int array
        Station of each row.
    """
    n = len(stations)
    weight = rows["thickness_m"].fillna(rows["thickness_m"].median()).fillna(1.0).to_numpy(dtype=np.float64)
    highest = pd.Series(rows["top_m"].to_numpy()).groupby(member).transform("max").to_numpy()
    lowest = pd.Series(rows["top_m"].to_numpy()).groupby(member).transform("min").to_numpy()
    weight = np.where(highest > lowest, weight, 1.0)
    merged = stations.copy()
    for quantity in quantities:
        value, half = (rows[c].to_numpy(dtype=np.float64) for c in (quantity.name, width_name(quantity.name)))
        known = np.isfinite(value)
        whole = np.bincount(member[known], weights=weight[known], minlength=n)
        for name, numbers in ((quantity.name, value), (width_name(quantity.name), half)):
            total = np.bincount(member[known], weights=(weight * numbers)[known], minlength=n)
            merged[name] = np.divide(total, whole, out=np.full(n, np.nan), where=whole > 0.0)
    return merged


def check_found(table: pd.DataFrame, quantities: Sequence[Quantity], fewest: int) -> list[str]:
    """Say how many stations know each quantity.

    Raises
    ------
    SampleError
        If too few do to be mapped.
    """
    notes = []
    for quantity in quantities:
        count = int(table[quantity.name].notna().sum())
        if count < fewest:
            what = (
                f'the column "{quantity.column}"'
                if quantity.column
                else "size classes or medians"
                if quantity.curve
                else "its columns"
            )
            raise SampleError(
                f'quantities "{quantity.name}": {count} of {len(table)} stations have it, expected at least {fewest}; '
                f"look at {what} in the files, or take the block out of the recipe"
            )
        notes.append(f"{quantity.name}: {count} of {len(table)} stations have it, in {quantity.units}")
    return notes


def _medians(given: FloatArray, classes: Classes | None) -> FloatArray:
    """Medians of the size curves, else those that the laboratory gives, which had the curve; never from three fractions."""
    if classes is None or not classes.known.any():
        return given
    value = np.full(len(given), np.nan)
    value[classes.known] = percentiles_from_weights(classes.limits_phi, classes.amounts[classes.known], 50.0)
    return np.where(np.isnan(value), given, value)


def _column(
    source: Source, block: Samples, quantity: Quantity, audit: AuditLog, notes: list[str]
) -> tuple[FloatArray, FloatArray]:
    n = len(source.table.rows)
    heading = block.quantities.get(quantity.name, quantity.column)
    home = _home(source, heading) if heading is not None else None
    if home is None:
        if quantity.name in block.quantities:
            raise _no_heading(source, str(heading), quantity.name)
        return np.full(n, np.nan), np.full(n, np.nan)
    table, index, match = home
    place = table.where.at(table.headings[index])
    cells, rows = table.columns[index], np.asarray(table.rows, dtype=np.int64)
    numbers = read_numbers(cells, place, table.rows)
    value, half = _read(numbers, cells, place, rows, audit)
    scale = Scale(quantity.scale, quantity.most)
    beyond = np.isfinite(value) & ~scale.fits(value)
    if beyond.any():
        between = "above 0" if quantity.scale == "log" else f"between 0 and {quantity.most:g}"
        hit = [int(i) for i in np.flatnonzero(beyond)]
        audit.add(place, rows[hit], [cells[i] for i in hit], [""] * len(hit),
                  f'{quantity.name}: left out, scale = "{quantity.scale}" needs numbers {between}')  # fmt: skip
        notes.append(
            f'{place.text()}: {len(hit)} values of {quantity.name} left out, such as "{cells[hit[0]]}" in row {rows[hit[0]]}: '
            f'scale = "{quantity.scale}" needs numbers {between}'
        )
        value = np.where(beyond, np.nan, value)
    if match is not None:
        value, half = (np.where(match >= 0, v[match], np.nan) for v in (value, half))
    return value, half


_RULES = {
    Reading.BELOW: "below a limit: 0.65 of the limit, and anything from 0 to it",
    Reading.RANGE: "range: its middle, and anything between its ends",
    Reading.ABOUT: "about: within a fifth of it",
    Reading.MARKED: "number with a mark or unit: the number",
    Reading.ABOVE: "above a limit, nobody says how far: left out",
    Reading.TRACE: "a trace of an amount that nobody says: left out",
}


def _read(
    numbers: Numbers, cells: Sequence[Cell], place: Where, rows: npt.NDArray[np.int64], audit: AuditLog
) -> tuple[FloatArray, FloatArray]:
    """Values and half widths of a column, each reading that is not plain in the audit."""
    below, about, above = (numbers.reading == r for r in (Reading.BELOW, Reading.ABOUT, Reading.ABOVE))
    value = np.where(below, OF_LIMIT * numbers.value, np.where(above, np.nan, numbers.value))
    half = np.where(below, 0.5 * numbers.value, np.where(about, ABOUT * np.abs(value), numbers.half_width))
    for reading, rule in _RULES.items():
        hit = [int(i) for i in np.flatnonzero(numbers.reading == reading)]
        audit.add(place, rows[hit], [cells[i] for i in hit], value[hit], rule)
    hit = [int(i) for i in np.flatnonzero(numbers.reading == Reading.UNREADABLE)]
    for i in hit:
        audit.add(place, rows[[i]], [cells[i]], [""], f"cannot read {unreadable_hint(cells[i])}: left out")
    return value, half


def _home(source: Source, heading: str) -> tuple[Table, int, npt.NDArray[np.int64] | None] | None:
    """Table, column and match of rows of a heading: among the results, else among the positions."""
    places = source.joined
    for table, match in ((source.table, None), (places.places, places.match) if places else (None, None)):
        if table is None:
            continue
        for names in (table.headings, table.lowest):
            hits = [i for i, name in enumerate(names) if name and plain(name) == plain(heading)]
            if len(hits) > 1:
                raise table.where.at(heading).error(
                    f"this heading {len(hits)} times",
                    "once",
                    "make the headings differ, or name another one under quantities",
                )
            if hits:
                return table, hits[0], match
    return None


def _no_heading(source: Source, heading: str, name: str) -> SampleError:
    known = [h for h in dict.fromkeys(source.table.headings) if h]
    near = difflib.get_close_matches(heading, known, n=1, cutoff=0.4)
    hint = f'did you mean "{near[0]}"?' if near else "headings there: " + ", ".join(f'"{k}"' for k in known[:12])
    return source.table.where.error(f'no column "{heading}"', f"the heading that the recipe gives for {name}", hint)
