"""Judge each row of one table: a sample, evidence of hard ground, set aside with a reason, or no sample at all."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.errors import SampleError
from texture.recipe import Intake, Quantity, Samples
from texture.stations.angles import join_fields, split_pairs
from texture.stations.audit import AuditLog
from texture.stations.bottoms import is_hard_ground
from texture.stations.cells import Numbers, read_numbers
from texture.stations.columns import Column
from texture.stations.cuts import cuts_of
from texture.stations.entries import days_of, interval_of, metres_of, texts_of
from texture.stations.fates import judge, words_of
from texture.stations.files import Cell, Sheet, is_blank
from texture.stations.fractions import share_out
from texture.stations.halves import halves_of
from texture.stations.headings import PARTS, role_of
from texture.stations.joins import Joined
from texture.stations.medians import medians_of
from texture.stations.metres import from_metres, from_zones
from texture.stations.positions import Positions, is_projected, read_degrees
from texture.stations.quantities import quantities_of
from texture.stations.shares import Shares, no_shares
from texture.stations.size_shares import shares_from_sizes
from texture.stations.sources import Source
from texture.stations.tables import Table
from texture.stations.where import Where

__all__ = ["LIMIT_COLUMNS", "bare_places", "read_rows"]

ROUGH_M = 100.0  # positions known no better than this are worth a note
LIMIT_COLUMNS = tuple(f"{part}_{end}" for part in ("mud", "sand", "gravel") for end in ("low", "high"))


def read_rows(
    source: Source,
    block: Samples,
    intake: Intake,
    detection_limit: float,
    audit: AuditLog,
    quantities: Sequence[Quantity] = (),
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
    log = AuditLog()
    shares = _shares(source, positions, block, intake, detection_limit, rows, log, notes)
    notes.extend((*positions.notes, *shares.notes))
    median = medians_of(source, shares, notes, log)
    further = quantities_of(source, block, quantities, median, shares.classes, log, notes)
    fates = judge(source, positions, shares, median, log)
    fate, reason = fates.fate, fates.reason
    audit.take_over(log, without=rows[fate == "not_samples"])
    depth = metres_of(source, "depth", notes)
    top, bottom = interval_of(source, notes)
    placed = np.isfinite(positions.longitude)
    told = [
        first or second
        for first, second in zip(texts_of(source, "description", ""), texts_of(source, "remarks", ""), strict=True)
    ]
    deep = _is_deep(top, bottom, intake.surface_m) & placed & (fate != "not_samples")
    _set_aside_deep(top, intake, fate, reason)
    dates = days_of(source, block, notes)
    mud_cut, gravel_cut, told_cuts = cuts_of(source.columns, source.sizes, intake, table.where)
    notes.extend(told_cuts)
    hard = fate == "evidence"
    parts = np.where(hard[:, None], np.nan, np.column_stack([shares.mud, shares.sand, shares.gravel]))
    kind = np.where(np.isfinite(parts).all(axis=1), block.method, "partial")
    kind = np.where(np.isnan(parts).all(axis=1) & np.isfinite(median), "median_only", kind)
    kind = np.where(hard, "hard_ground", np.where(fates.described != "", "description", kind))
    frame = pd.DataFrame(
        {
            "id": texts_of(source, "id", ""),
            "survey": texts_of(source, "survey", block.survey or block.file.stem),
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
            "position_accuracy_m": _accuracy(positions, block, table, notes),
            "description": texts_of(source, "description", ""),
            "described_class": fates.described,
            **_limit_columns(shares, hard),
            "median_phi": np.where(hard, np.nan, median),
            "mud_below_mm": np.where(np.isfinite(parts[:, 0]), mud_cut, np.nan),
            "gravel_above_mm": np.where(np.isfinite(parts[:, 2]), gravel_cut, np.nan),
            "top_m": np.nan_to_num(top),
            "bottom_m": bottom,
            "deep": deep,
            "note": np.where(deep, np.array(told, dtype=object), ""),
            "thickness_m": _thickness(top, bottom, intake.surface_m),
            "fate": fate,
            "reason": reason,
            **further,
        }
    )
    return frame, notes


def _accuracy(positions: Positions, block: Samples, table: Table, notes: list[str]) -> npt.NDArray[np.float64]:
    """How far each position may be off: by its digits, or as the recipe says where that is more."""
    accuracy = np.where(
        np.isnan(positions.accuracy_m), np.nan, np.fmax(positions.accuracy_m, block.position_accuracy_m or 0.0)
    )
    rough = accuracy[accuracy >= ROUGH_M]
    if len(rough):
        said = (
            "as the recipe says"
            if block.position_accuracy_m and rough.max() == block.position_accuracy_m
            else "by their digits"
        )
        notes.append(
            f"{table.where.text()}: {len(rough)} positions are known to ± {rough.min():,.0f}"
            + (f" … {rough.max():,.0f}" if round(rough.max()) > round(rough.min()) else "")
            + f" m {said}; that becomes noise of these stations"
        )
    return accuracy


def bare_places(joined: Joined, block: Samples) -> pd.DataFrame:
    """Rows of a table of positions to which no result belongs but whose words tell of hard ground."""
    places = joined.places
    alone = np.setdiff1d(np.arange(len(places.rows)), joined.match)
    words = {int(i): words_of([column[i] for column in places.columns]) for i in alone}
    hard = np.array([i for i, text in words.items() if is_hard_ground(text)], dtype=np.int64)
    positions = _positions(places, joined.columns, block)
    hard = hard[np.isfinite(positions.longitude[hard])] if len(hard) else hard
    source = Source(Sheet(places.where.file, places.where.sheet, []), places, joined.columns)
    frame = pd.DataFrame({"id": np.array(texts_of(source, "id", ""), dtype=object)[hard]})
    frame["survey"] = np.array(texts_of(source, "survey", block.survey or block.file.stem), dtype=object)[hard]
    frame["longitude"], frame["latitude"] = positions.longitude[hard], positions.latitude[hard]
    frame[["mud", "sand", "gravel"]] = np.nan
    frame["kind"] = "hard_ground"
    frame["file"], frame["sheet"] = places.where.file, places.where.sheet
    frame["row"] = np.asarray(places.rows, dtype=np.int64)[hard]
    frame["date"] = days_of(source, block, [])[hard]
    frame["depth_m"] = metres_of(source, "depth", [])[hard]
    frame["resolution"] = np.nan
    frame["position_accuracy_m"] = positions.accuracy_m[hard]
    frame["description"] = ""
    frame["described_class"] = ""
    frame[[*LIMIT_COLUMNS, "median_phi", "mud_below_mm", "gravel_above_mm"]] = np.nan
    frame["top_m"], frame["thickness_m"], frame["bottom_m"] = 0.0, np.nan, np.nan
    frame["deep"], frame["note"] = False, ""
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
    minutes = block.degrees == "minutes"
    said = block.crs, block.hemisphere, minutes
    if degrees:
        where = place("longitude"), place("latitude")
        halves, told = halves_of(table, columns, block.hemisphere)
        found = read_degrees(cells("longitude"), cells("latitude"), where, table.rows, block.crs, halves, minutes)
        return replace(found, notes=(*told, *found.notes))
    if metres and not degrees and _hold_degrees(columns, block):
        pair = place("easting"), place("northing")
        return read_degrees(cells("easting"), cells("northing"), pair, table.rows, *said)
    if metres and "zone" in columns and block.crs is None:
        where = place("easting"), place("northing")
        zone = table.columns[columns["zone"].index]
        return from_zones(cells("easting"), cells("northing"), zone, where, table.rows, place("zone"))
    if metres:
        where = place("easting"), place("northing")
        return from_metres(cells("easting"), cells("northing"), where, table.rows, block.crs)
    if "position" in columns:
        latitude, longitude = split_pairs(cells("position"))
        return read_degrees(longitude, latitude, (place("position"), place("position")), table.rows, *said)
    raise _no_column(table, "columns of latitude and longitude, or of easting and northing", "name them")


def _hold_degrees(columns: Mapping[str, Column], block: Samples) -> bool:
    """Whether columns of easting and northing are degrees: X and Y of a geographic system, or bare "N" and "E"."""
    if block.crs is not None:
        return not is_projected(block.crs)
    hints = [role_of(columns[role].heading) for role in ("easting", "northing")]
    return "zone" not in columns and all(hint is not None and hint[1] == 1 for hint in hints)


def _no_column(table: Table, expected: str, do: str) -> SampleError:
    known = ", ".join(f'"{h}"' for h in table.headings if h)
    return table.where.error(
        f"headings {known}", expected, f"{do} under columns in the recipe", row=table.header_rows[0]
    )


def _shares(
    source: Source,
    positions: Positions,
    block: Samples,
    intake: Intake,
    detection_limit: float,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    notes: list[str],
) -> Shares:
    table, columns = source.table, source.columns
    if source.sizes:
        return shares_from_sizes(table, source.sizes, block, intake, audit, columns.get("split_factor"))
    parts = [role for role in PARTS if role in columns]
    if not parts and not {"description", "median_size"} & set(columns):
        raise _no_column(table, "a column of mud, sand or gravel, or of words for the bottom", "name it")
    if not parts:
        return no_shares(len(rows))
    numbers: dict[str, Numbers] = {}
    cells: dict[str, Sequence[Cell]] = {}
    for role in parts:
        cells[role] = table.columns[columns[role].index]
        numbers[role] = read_numbers(cells[role], table.where.at(columns[role].heading), table.rows)
        _check_numeric(table, columns[role], numbers[role])
        if (tare := columns.get(f"{role}_tare")) is not None:
            empty = read_numbers(table.columns[tare.index], table.where.at(tare.heading), table.rows)
            numbers[role] = replace(numbers[role], value=numbers[role].value - empty.value)
            notes.append(f'{table.where.at(columns[role].heading).text()}: less its tare "{tare.heading}"')
    placed = np.isfinite(positions.longitude)
    tolerance = intake.sum_tolerance
    return share_out(numbers, cells, columns, block, table.where, rows, audit, placed, tolerance, detection_limit)


def _limit_columns(shares: Shares, hard: npt.NDArray[np.bool_]) -> dict[str, npt.NDArray[np.float64]]:
    limits = np.stack([shares.low, shares.high], axis=2).reshape(len(hard), 6)
    return dict(zip(LIMIT_COLUMNS, np.where(hard[:, None], np.nan, limits).T, strict=True))


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


def _thickness(
    top: npt.NDArray[np.float64], bottom: npt.NDArray[np.float64], surface_m: float
) -> npt.NDArray[np.float64]:
    """Thickness of each sample above the surface depth; NaN where its ends do not tell."""
    thickness = np.minimum(bottom, surface_m) - np.nan_to_num(top)
    return np.where(thickness > 0.0, thickness, np.nan)


def _is_deep(top: npt.NDArray[np.float64], bottom: npt.NDArray[np.float64], surface_m: float) -> npt.NDArray[np.bool_]:
    """Whether an interval lies below the surface layer, or reaches below it by more than a millimetre."""
    return (top >= surface_m) | (bottom > surface_m + 1e-3)


def _set_aside_deep(
    top: npt.NDArray[np.float64], intake: Intake, fate: npt.NDArray[np.object_], reason: npt.NDArray[np.object_]
) -> None:
    for i in map(int, np.flatnonzero((top >= intake.surface_m) & (fate == "used"))):
        fate[i] = "set_aside"
        reason[i] = (
            f"begins {top[i]:g} m below the surface of the bed, deeper than intake.surface_m = {intake.surface_m:g}"
        )
