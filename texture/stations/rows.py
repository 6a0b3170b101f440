"""Judge each row of one table: a sample, evidence of hard ground, set aside with a reason, or no sample at all."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.recipe import Intake, Samples
from texture.stations.angles import split_pairs
from texture.stations.audit import AuditLog
from texture.stations.bottoms import is_hard_ground, is_total
from texture.stations.cells import Numbers, read_numbers
from texture.stations.columns import Column, assign_columns
from texture.stations.dates import read_dates
from texture.stations.files import Cell, is_blank
from texture.stations.fractions import Shares, share_out
from texture.stations.headings import PARTS
from texture.stations.positions import Positions, from_metres, is_projected, read_degrees
from texture.stations.tables import Table

__all__ = ["read_rows"]

METRES = {"cm": 0.01, "mm": 0.001, "ft": 0.3048, "fathom": 1.8288}


def read_rows(
    table: Table, block: Samples, intake: Intake, detection_limit: float, audit: AuditLog
) -> tuple[pd.DataFrame, list[str]]:
    """Read every row below the header of a table.

    Returns
    -------
    rows : DataFrame
        One row for each, with its `fate` (used, evidence, set_aside, not_samples), `reason` and, where used, everything
        that the stations carry.
    notes : list of str

    Raises
    ------
    SampleError
        If positions or parts cannot be found or read at all.
    """
    columns = assign_columns(table, block.columns)
    rows = np.asarray(table.rows, dtype=np.int64)
    notes: list[str] = []
    positions = _positions(table, columns, block, rows)
    notes.extend(positions.notes)
    shares = _shares(table, columns, block, intake, detection_limit, rows, audit)
    notes.extend(shares.notes)
    fate, reason = _judge(table, columns, positions, shares, rows)
    depth = _metres(table, columns, "depth", rows, notes)
    _set_aside_deep(table, columns, intake, rows, fate, reason, notes)
    dates = _dates(table, columns, block, notes)
    hard = fate == "evidence"
    known = np.isfinite(np.column_stack([shares.mud, shares.sand, shares.gravel]))
    kind = np.where(hard, "hard_ground", np.where(known.all(axis=1), block.method, "partial"))
    frame = pd.DataFrame(
        {
            "id": _texts(table, columns, "id", ""),
            "survey": _texts(table, columns, "survey", block.survey or block.file.stem),
            "longitude": positions.longitude,
            "latitude": positions.latitude,
            "mud": np.where(hard, np.nan, shares.mud),
            "sand": np.where(hard, np.nan, shares.sand),
            "gravel": np.where(hard, np.nan, shares.gravel),
            "kind": kind,
            "file": table.where.file,
            "sheet": table.where.sheet,
            "row": rows,
            "date": dates,
            "depth_m": depth,
            "resolution": np.where(hard, np.nan, shares.resolution),
            "position_accuracy_m": positions.accuracy_m,
            "description": _texts(table, columns, "description", ""),
            "fate": fate,
            "reason": reason,
        }
    )
    return frame, notes


def _positions(table: Table, columns: Mapping[str, Column], block: Samples, rows: npt.NDArray[np.int64]) -> Positions:
    numbers = rows.tolist()

    def cells(role: str) -> list[Cell]:
        return table.columns[columns[role].index]

    def place(role: str):  # type: ignore[no-untyped-def]
        return table.where.at(columns[role].heading)

    degrees = "latitude" in columns and "longitude" in columns
    metres = "easting" in columns and "northing" in columns
    if degrees and metres and block.crs is not None:
        degrees = not is_projected(block.crs)
    if degrees:
        return read_degrees(
            cells("longitude"), cells("latitude"), (place("longitude"), place("latitude")), numbers, block.crs
        )
    if metres:
        return from_metres(
            cells("easting"), cells("northing"), (place("easting"), place("northing")), numbers, block.crs
        )
    if "position" in columns:
        latitude, longitude = split_pairs(cells("position"))
        return read_degrees(longitude, latitude, (place("position"), place("position")), numbers, block.crs)
    known = ", ".join(f'"{h}"' for h in table.headings if h)
    raise table.where.error(
        f"headings {known}",
        "columns of latitude and longitude, or of easting and northing",
        "name them under columns in the recipe",
        row=table.header_rows[0],
    )


def _shares(
    table: Table,
    columns: Mapping[str, Column],
    block: Samples,
    intake: Intake,
    detection_limit: float,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
) -> Shares:
    parts = [role for role in PARTS if role in columns]
    if not parts:
        known = ", ".join(f'"{h}"' for h in table.headings if h)
        raise table.where.error(
            f"headings {known}",
            "a column of mud, sand or gravel",
            "name it under columns in the recipe",
            row=table.header_rows[0],
        )
    numbers: dict[str, Numbers] = {}
    cells: dict[str, Sequence[Cell]] = {}
    for role in parts:
        cells[role] = table.columns[columns[role].index]
        numbers[role] = read_numbers(cells[role], table.where.at(columns[role].heading), table.rows)
        _check_numeric(table, columns[role], numbers[role])
    return share_out(numbers, cells, columns, block, table.where, rows, audit, intake.sum_tolerance, detection_limit)


def _check_numeric(table: Table, column: Column, numbers: Numbers) -> None:
    filled = [i for i, c in enumerate(table.columns[column.index]) if not is_blank(c)]
    if filled and not (numbers.reading[filled] < 9).any():
        i = filled[0]
        raise table.where.at(column.heading).error(
            f'"{table.columns[column.index][i]}"',
            f"numbers for {column.role}",
            "name another column",
            row=table.rows[i],
        )


def _judge(
    table: Table, columns: Mapping[str, Column], positions: Positions, shares: Shares, rows: npt.NDArray[np.int64]
) -> tuple[npt.NDArray[np.object_], npt.NDArray[np.object_]]:
    """Fate and reason of each row; only rows that are not plainly used are looked at one by one."""
    n = len(rows)
    fate, reason = np.full(n, "used", dtype=object), np.full(n, "", dtype=object)
    placed = np.isfinite(positions.longitude) & np.isfinite(positions.latitude)
    informed = np.isfinite(shares.mud) | np.isfinite(shares.sand) | np.isfinite(shares.gravel)
    for i in np.flatnonzero(~(placed & informed & (shares.problem == ""))):
        cells = [column[i] for column in table.columns]
        fate[i], reason[i] = _fate_of(
            cells, columns, bool(placed[i]), bool(informed[i]), positions.problem[i], shares, int(i)
        )
    return fate, reason


def _fate_of(
    cells: list[Cell],
    columns: Mapping[str, Column],
    placed: bool,
    informed: bool,
    position_problem: str,
    shares: Shares,
    i: int,
) -> tuple[str, str]:
    texts = [c.strip() for c in cells if isinstance(c, str) and c.strip()]
    words = " · ".join(t for t in texts if any(ch.isalpha() for ch in t))
    measured = informed or "sum" in shares.problem[i]
    if not placed:
        matters = [
            columns[r].index
            for r in columns
            if r in (*PARTS, "latitude", "longitude", "easting", "northing", "position")
        ]
        if texts and is_total(texts[0]):
            return "not_samples", "total or mean line"
        if all(is_blank(cells[k]) for k in matters) or (not shares.given[i] and len(texts) <= 1 and _alone(cells)):
            return "not_samples", "note"
        return "set_aside", position_problem or "no position"
    if measured:
        return ("set_aside", shares.problem[i]) if shares.problem[i] else ("used", "")
    if is_hard_ground(words):
        return "evidence", words
    return "set_aside", shares.problem[i] or "no share of mud, sand or gravel"


def _alone(cells: list[Cell]) -> bool:
    return sum(not is_blank(c) for c in cells) == 1


def _set_aside_deep(
    table: Table,
    columns: Mapping[str, Column],
    intake: Intake,
    rows: npt.NDArray[np.int64],
    fate: npt.NDArray[np.object_],
    reason: npt.NDArray[np.object_],
    notes: list[str],
) -> None:
    top = _metres(table, columns, "sample_top", rows, notes)
    deep = (top >= intake.surface_m) & (fate == "used")
    fate[deep] = "set_aside"
    for i in np.flatnonzero(deep):
        reason[i] = (
            f"begins {top[i]:g} m below the surface of the bed, deeper than intake.surface_m = {intake.surface_m:g}"
        )


def _metres(
    table: Table, columns: Mapping[str, Column], role: str, rows: npt.NDArray[np.int64], notes: list[str]
) -> npt.NDArray[np.float64]:
    """A column of lengths in metres, positive down; NaN where there is none."""
    if role not in columns:
        return np.full(len(rows), np.nan)
    column = columns[role]
    place = table.where.at(column.heading)
    value = read_numbers(table.columns[column.index], place, table.rows).value
    unit = column.unit if column.unit in METRES else "m"
    if unit != "m":
        notes.append(f"{place.text()}: {unit} turned to metres")
    value = value * METRES.get(unit, 1.0)
    known = value[np.isfinite(value)]
    if role == "depth" and len(known) and (known <= 0.0).all() and (known < 0.0).any():
        notes.append(f"{place.text()}: heights turned to depths")
        value = -value
    return value


def _dates(table: Table, columns: Mapping[str, Column], block: Samples, notes: list[str]) -> npt.NDArray[np.object_]:
    """ISO dates; rows without one get the survey's own days, an ISO 8601 interval where both are given."""
    dates = np.full(len(table.rows), "", dtype=object)
    if "date" in columns:
        place = table.where.at(columns["date"].heading)
        dates, found = read_dates(table.columns[columns["date"].index], place)
        notes.extend(found)
        first, last = (d.isoformat() if d else None for d in (block.from_, block.to))
        full = np.array([len(d) == 10 for d in dates], dtype=bool)
        outside = [i for i in np.flatnonzero(full) if (first and dates[i] < first) or (last and dates[i] > last)]
        if outside:
            notes.append(
                f"{place.text()}: {len(outside)} dates outside the survey's from and to, such as {dates[outside[0]]} in row {table.rows[outside[0]]}"
            )
    if block.from_ is not None:
        days = block.from_.isoformat() + (f"/{block.to.isoformat()}" if block.to and block.to != block.from_ else "")
        dates[dates == ""] = days
    return dates


def _texts(table: Table, columns: Mapping[str, Column], role: str, otherwise: str) -> list[str]:
    if role not in columns:
        return [otherwise] * len(table.rows)
    return [_text(c) or otherwise for c in table.columns[columns[role].index]]


def _text(cell: Cell) -> str:
    if is_blank(cell):
        return ""
    if isinstance(cell, float) and cell.is_integer():
        return str(int(cell))
    return " ".join(str(cell).split())
