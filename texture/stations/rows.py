"""Judge each row of one table: a sample, evidence of hard ground, set aside with a reason, or no sample at all."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.errors import SampleError
from texture.recipe import Intake, Samples
from texture.stations.angles import join_fields, split_pairs
from texture.stations.audit import AuditLog
from texture.stations.bottoms import is_hard_ground, is_total
from texture.stations.cells import Numbers, read_numbers
from texture.stations.columns import Column
from texture.stations.dates import read_dates
from texture.stations.files import Cell, Sheet, is_blank
from texture.stations.fractions import Shares, share_out
from texture.stations.headings import PARTS
from texture.stations.intervals import read_intervals
from texture.stations.joins import POSITION_ROLES, Joined
from texture.stations.positions import Positions, from_metres, from_zones, is_projected, read_degrees
from texture.stations.size_shares import shares_from_sizes
from texture.stations.sources import Source
from texture.stations.tables import Table
from texture.stations.where import Where

__all__ = ["bare_places", "read_rows"]

METRES = {"cm": 0.01, "mm": 0.001, "ft": 0.3048, "fathom": 1.8288}


def read_rows(
    source: Source, block: Samples, intake: Intake, detection_limit: float, audit: AuditLog
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
    table = source.table
    rows = np.asarray(table.rows, dtype=np.int64)
    notes: list[str] = []
    positions = _positions_of(source, block)
    shares = _shares(source, block, intake, detection_limit, rows, audit)
    notes.extend((*positions.notes, *shares.notes))
    fate, reason = _judge(source, positions, shares)
    depth = _metres(source, "depth", notes)
    _set_aside_deep(_top_of(source, notes), intake, fate, reason)
    dates = _dates(source, block, notes)
    hard = fate == "evidence"
    parts = np.where(hard[:, None], np.nan, np.column_stack([shares.mud, shares.sand, shares.gravel]))
    kind = np.where(hard, "hard_ground", np.where(np.isfinite(parts).all(axis=1), block.method, "partial"))
    frame = pd.DataFrame(
        {
            "id": _texts(source, "id", ""),
            "survey": _texts(source, "survey", block.survey or block.file.stem),
            "longitude": positions.longitude,
            "latitude": positions.latitude,
            "mud": parts[:, 0],
            "sand": parts[:, 1],
            "gravel": parts[:, 2],
            "kind": kind,
            "file": table.where.file,
            "sheet": table.where.sheet,
            "row": rows,
            "date": dates,
            "depth_m": depth,
            "resolution": np.where(hard, np.nan, shares.resolution),
            "position_accuracy_m": positions.accuracy_m,
            "description": _texts(source, "description", ""),
            "fate": fate,
            "reason": reason,
        }
    )
    return frame, notes


def bare_places(joined: Joined, block: Samples) -> pd.DataFrame:
    """Rows of a table of positions to which no result belongs but whose words tell of hard ground."""
    places = joined.places
    alone = np.setdiff1d(np.arange(len(places.rows)), joined.match)
    words = {int(i): _words([column[i] for column in places.columns]) for i in alone}
    hard = np.array([i for i, text in words.items() if is_hard_ground(text)], dtype=np.int64)
    positions = _positions(places, joined.columns, block)
    hard = hard[np.isfinite(positions.longitude[hard])] if len(hard) else hard
    source = Source(Sheet(places.where.file, places.where.sheet, []), places, joined.columns)
    frame = pd.DataFrame({"id": np.array(_texts(source, "id", ""), dtype=object)[hard]})
    frame["survey"] = np.array(_texts(source, "survey", block.survey or block.file.stem), dtype=object)[hard]
    frame["longitude"], frame["latitude"] = positions.longitude[hard], positions.latitude[hard]
    frame[["mud", "sand", "gravel"]] = np.nan
    frame["kind"] = "hard_ground"
    frame["file"], frame["sheet"] = places.where.file, places.where.sheet
    frame["row"] = np.asarray(places.rows, dtype=np.int64)[hard]
    frame["date"] = _dates(source, block, [])[hard]
    frame["depth_m"] = _metres(source, "depth", [])[hard]
    frame["resolution"] = np.nan
    frame["position_accuracy_m"] = positions.accuracy_m[hard]
    frame["description"] = ""
    frame["fate"] = "evidence"
    frame["reason"] = [words[int(i)] for i in hard]
    return frame


def _positions_of(source: Source, block: Samples) -> Positions:
    """Positions of the rows of results, taken from the joined table where there is one."""
    home = source.joined
    if home is None:
        return _positions(source.table, source.columns, block)
    found = _positions(home.places, home.columns, block)
    lost = home.match < 0
    problem = np.where(lost, home.problem, found.problem[home.match])

    def taken(values: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
        return np.where(lost, np.nan, values[home.match])

    return Positions(
        taken(found.longitude), taken(found.latitude), taken(found.accuracy_m), problem.astype(object), found.notes
    )


def _positions(table: Table, columns: Mapping[str, Column], block: Samples) -> Positions:
    def cells(role: str) -> list[Cell]:
        # degrees, minutes, seconds and hemisphere may stand in columns of their own
        fields = [f"{role}{end}" for end in ("", "_minutes", "_seconds", "_hemisphere") if f"{role}{end}" in columns]
        found = [table.columns[columns[f].index] for f in fields]
        return join_fields(*found) if len(found) > 1 else found[0]

    def place(role: str) -> Where:
        return table.where.at(columns[role].heading)

    degrees = "latitude" in columns and "longitude" in columns
    metres = "easting" in columns and "northing" in columns
    if degrees and metres and block.crs is not None:
        degrees = not is_projected(block.crs)
    if degrees:
        where = place("longitude"), place("latitude")
        return read_degrees(cells("longitude"), cells("latitude"), where, table.rows, block.crs, block.hemisphere)
    if metres and "zone" in columns and block.crs is None:
        where = place("easting"), place("northing")
        zone = table.columns[columns["zone"].index]
        return from_zones(cells("easting"), cells("northing"), zone, where, table.rows, place("zone"))
    if metres:
        where = place("easting"), place("northing")
        return from_metres(cells("easting"), cells("northing"), where, table.rows, block.crs)
    if "position" in columns:
        latitude, longitude = split_pairs(cells("position"))
        return read_degrees(
            longitude, latitude, (place("position"), place("position")), table.rows, block.crs, block.hemisphere
        )
    raise _no_column(table, "columns of latitude and longitude, or of easting and northing", "name them")


def _no_column(table: Table, expected: str, do: str) -> SampleError:
    known = ", ".join(f'"{h}"' for h in table.headings if h)
    return table.where.error(
        f"headings {known}", expected, f"{do} under columns in the recipe", row=table.header_rows[0]
    )


def _shares(
    source: Source,
    block: Samples,
    intake: Intake,
    detection_limit: float,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
) -> Shares:
    table, columns = source.table, source.columns
    if source.sizes:
        return shares_from_sizes(table, source.sizes, block, intake, audit)
    parts = [role for role in PARTS if role in columns]
    if not parts:
        raise _no_column(table, "a column of mud, sand or gravel", "name it")
    numbers: dict[str, Numbers] = {}
    cells: dict[str, Sequence[Cell]] = {}
    for role in parts:
        cells[role] = table.columns[columns[role].index]
        numbers[role] = read_numbers(cells[role], table.where.at(columns[role].heading), table.rows)
        _check_numeric(table, columns[role], numbers[role])
    tolerance = intake.sum_tolerance
    return share_out(numbers, cells, columns, block, table.where, rows, audit, tolerance, detection_limit)


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
    source: Source, positions: Positions, shares: Shares
) -> tuple[npt.NDArray[np.object_], npt.NDArray[np.object_]]:
    """Fate and reason of each row; only rows that are not plainly used are looked at one by one."""
    n = len(source.table.rows)
    fate, reason = np.full(n, "used", dtype=object), np.full(n, "", dtype=object)
    placed = np.isfinite(positions.longitude) & np.isfinite(positions.latitude)
    informed = np.isfinite(shares.mud) | np.isfinite(shares.sand) | np.isfinite(shares.gravel)
    for i in map(int, np.flatnonzero(~(placed & informed & (shares.problem == "")))):
        fate[i], reason[i] = _fate_of(source, i, bool(placed[i]), bool(informed[i]), positions.problem[i], shares)
    return fate, reason


def _fate_of(
    source: Source, i: int, placed: bool, informed: bool, position_problem: str, shares: Shares
) -> tuple[str, str]:
    table, columns, home = source.table, source.columns, source.joined
    cells = [column[i] for column in table.columns]
    texts = [c.strip() for c in cells if isinstance(c, str) and c.strip()]
    measured = informed or "sum" in shares.problem[i]
    if not placed:
        roles = ("id",) if home else POSITION_ROLES
        matters = [columns[r].index for r in columns if r in (*PARTS, *roles)] + [c.index for c in source.sizes]
        if texts and is_total(texts[0]):
            return "not_samples", "total or mean line"
        if all(is_blank(cells[k]) for k in matters) or (not shares.given[i] and _alone(cells)):
            return "not_samples", "note"
        return "set_aside", position_problem or "no position"
    if measured:
        return ("set_aside", shares.problem[i]) if shares.problem[i] else ("used", "")
    if home is not None and home.match[i] >= 0:
        cells += [column[home.match[i]] for column in home.places.columns]
    words = _words(cells)
    if is_hard_ground(words):
        return "evidence", words
    return "set_aside", shares.problem[i] or "no share of mud, sand or gravel"


def _words(cells: list[Cell]) -> str:
    """Texts with letters of a row, one after the other."""
    return " · ".join(c.strip() for c in cells if isinstance(c, str) and any(ch.isalpha() for ch in c))


def _alone(cells: list[Cell]) -> bool:
    return sum(not is_blank(c) for c in cells) == 1


def _set_aside_deep(
    top: npt.NDArray[np.float64], intake: Intake, fate: npt.NDArray[np.object_], reason: npt.NDArray[np.object_]
) -> None:
    for i in map(int, np.flatnonzero((top >= intake.surface_m) & (fate == "used"))):
        fate[i] = "set_aside"
        reason[i] = (
            f"begins {top[i]:g} m below the surface of the bed, deeper than intake.surface_m = {intake.surface_m:g}"
        )


def _home_of(source: Source, role: str) -> tuple[Table, Column, npt.NDArray[np.int64] | None] | None:
    """The table and column of a role: among the results, else among the positions with the match of rows."""
    if role in source.columns:
        return source.table, source.columns[role], None
    if source.joined is not None and role in source.joined.columns:
        return source.joined.places, source.joined.columns[role], source.joined.match
    return None


def _top_of(source: Source, notes: list[str]) -> npt.NDArray[np.float64]:
    """How far below the surface of the bed each sample begins, in metres; NaN where nothing is said."""
    top = _metres(source, "sample_top", notes)
    home = _home_of(source, "sample_interval")
    if home is None:
        return top
    table, column, match = home
    found, _, unread = read_intervals(table.columns[column.index], column.unit)
    if unread:
        i = unread[0]
        notes.append(
            f'{table.where.at(column.heading).text()}: {len(unread)} entries are no intervals, such as "{table.columns[column.index][i]}" '
            f"in row {table.rows[i]}: taken as surface samples"
        )
    found = found if match is None else np.where(match >= 0, found[match], np.nan)
    return np.where(np.isnan(top), found, top)


def _metres(source: Source, role: str, notes: list[str]) -> npt.NDArray[np.float64]:
    """A column of lengths in metres, positive down; NaN where there is none."""
    home = _home_of(source, role)
    if home is None:
        return np.full(len(source.table.rows), np.nan)
    table, column, match = home
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
    return value if match is None else np.where(match >= 0, value[match], np.nan)


def _dates(source: Source, block: Samples, notes: list[str]) -> npt.NDArray[np.object_]:
    """ISO dates; rows without one get the survey's own days, an ISO 8601 interval where both are given."""
    home = _home_of(source, "date")
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


def _texts(source: Source, role: str, otherwise: str) -> list[str]:
    home = _home_of(source, role)
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
