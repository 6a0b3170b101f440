"""What rides along with a sample: ids and other texts, depths, sample intervals, days."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from texture.recipe import Samples
from texture.stations.cells import read_numbers
from texture.stations.columns import Column
from texture.stations.dates import read_dates
from texture.stations.files import Cell, is_blank
from texture.stations.intervals import read_intervals
from texture.stations.sources import Source
from texture.stations.tables import Table
from texture.stations.where import Where, shown

__all__ = ["days_of", "home_of", "interval_of", "metres_of", "texts_of"]

METRES = {"cm": 0.01, "mm": 0.001, "ft": 0.3048, "fathom": 1.8288}


def home_of(source: Source, role: str) -> tuple[Table, Column, npt.NDArray[np.int64] | None] | None:
    """The table and column of a role: among the results, else among the positions with the match of rows."""
    if role in source.columns:
        return source.table, source.columns[role], None
    if source.joined is not None and role in source.joined.columns:
        return source.joined.places, source.joined.columns[role], source.joined.match
    return None


def interval_of(source: Source, notes: list[str]) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Where each sample begins and ends, in metres below the surface of the bed; NaN where nothing is said."""
    top, bottom = (metres_of(source, role, notes) for role in ("sample_top", "sample_bottom"))
    home = home_of(source, "sample_interval")
    if home is None:
        return top, bottom
    table, column, match = home
    begins, ends, unread = read_intervals(table.columns[column.index], column.unit)
    if unread:
        i = unread[0]
        notes.append(
            f'{table.where.at(column.heading).text()}: {len(unread)} entries are no intervals, such as "{table.columns[column.index][i]}" '
            f"in row {table.rows[i]}: taken as surface samples"
        )
    if match is not None:
        begins, ends = (np.where(match >= 0, v[match], np.nan) for v in (begins, ends))
    return np.where(np.isnan(top), begins, top), np.where(np.isnan(bottom), ends, bottom)


def metres_of(source: Source, role: str, notes: list[str]) -> npt.NDArray[np.float64]:
    """A column of lengths in metres, positive down; NaN where there is none."""
    home = home_of(source, role)
    if home is None:
        return np.full(len(source.table.rows), np.nan)
    table, column, match = home
    place = table.where.at(column.heading)
    value = read_numbers(table.columns[column.index], place, table.rows).value
    if role != "depth" and column.unit is None and np.nanmax(value, initial=0.0) > 0.0:
        i = int(np.nanargmax(value))
        raise place.error(
            f"{shown(table.columns[column.index][i])} without a unit",
            "a heading that says cm or m",
            "write the unit into the heading",
            row=table.rows[i],
        )
    unit = column.unit if column.unit in METRES else "m"
    if unit != "m":
        notes.append(f"{place.text()}: {unit} turned to metres")
    value = np.round(value * METRES.get(unit, 1.0), 9)  # 35 cm are 0.35 m, not a bit more
    known = value[np.isfinite(value)]
    if role == "depth" and len(known) and (known <= 0.0).all() and (known < 0.0).any():
        notes.append(f"{place.text()}: heights turned to depths")
        value = -value
    return value if match is None else np.where(match >= 0, value[match], np.nan)


def days_of(source: Source, block: Samples, notes: list[str]) -> npt.NDArray[np.object_]:
    """ISO dates; rows without one get the survey's own days, an ISO 8601 interval where both are given."""
    home = home_of(source, "date")
    if home is None:
        dates = np.full(len(source.table.rows), "", dtype=object)
    else:
        table, column, match = home
        place = table.where.at(column.heading)
        dates, found = read_dates(table.columns[column.index], place)
        notes.extend(found)
        _check_days(dates, block, place, table.rows, notes)
        if match is not None:
            dates = np.where(match >= 0, dates[match], "").astype(object)
    if block.from_ is not None:
        days = block.from_.isoformat() + (f"/{block.to.isoformat()}" if block.to and block.to != block.from_ else "")
        dates[dates == ""] = days
    return dates


def _check_days(
    dates: npt.NDArray[np.object_], block: Samples, place: Where, rows: Sequence[int], notes: list[str]
) -> None:
    if block.from_ is None and block.to is None:
        return
    first, last = (d.isoformat() if d else None for d in (block.from_, block.to))
    full = [i for i, d in enumerate(dates) if len(d) == 10]
    outside = [i for i in full if (first and dates[i] < first) or (last and dates[i] > last)]
    if outside:
        i = outside[0]
        notes.append(
            f"{place.text()}: {len(outside)} dates outside the survey's from and to, such as {dates[i]} in row {rows[i]}"
        )


def texts_of(source: Source, role: str, otherwise: str) -> list[str]:
    """A column of texts; `otherwise` where it is blank or missing."""
    home = home_of(source, role)
    if home is None:
        return [otherwise] * len(source.table.rows)
    table, column, match = home
    texts = [_text(c) or otherwise for c in table.columns[column.index]]
    return texts if match is None else [texts[m] if m >= 0 else otherwise for m in match]


def _text(cell: Cell) -> str:
    if is_blank(cell):
        return ""
    if isinstance(cell, float) and cell.is_integer():
        return str(int(cell))
    return " ".join(str(cell).split())
