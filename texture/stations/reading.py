"""From the files of a recipe to `Stations`: each file read, its rows judged, repeats merged, every row accounted for."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.errors import SampleError
from texture.recipe import Recipe, Samples
from texture.stations.account import DEEPER_COLUMNS, FATES, LEDGER_COLUMNS, TABLE_COLUMNS, Stations, _with_points
from texture.stations.ages import grow_noise
from texture.stations.audit import AuditLog
from texture.stations.copies import find_copies
from texture.stations.offsets import Offset, method_offsets
from texture.stations.quantities import check_found, merge_quantities, width_name
from texture.stations.repeats import merge_repeats
from texture.stations.rows import bare_places, read_rows
from texture.stations.sources import find_source
from texture.stations.voids import set_void

__all__ = ["FEWEST", "read_samples"]

METHODS = ("sieve", "laser", "pipette")
LEAST_MUD = 0.005  # shares below it are compared as if they were this; their logarithm is mostly rounding
FEWEST = 5  # stations; below this no spatial structure can be told from chance


@dataclass
class _Intake:
    """What is gathered while the files of a recipe are read."""

    audit: AuditLog = field(default_factory=AuditLog)
    frames: list[pd.DataFrame] = field(default_factory=list)
    aside: list[pd.DataFrame] = field(default_factory=list)
    rows_read: dict[tuple[str, str], int] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)


def read_samples(recipe: Recipe) -> Stations:
    """Read all sample files of a recipe into stations.

    Placing stations on the target (land, snapping) is a later step: `Stations.with_changes`.

    Parameters
    ----------
    recipe : Recipe
        Its `samples`, `intake` and `composition.detection_limit` act here. Paths must be absolute or relative to the
        current folder.

    Returns
    -------
    stations : Stations

    Raises
    ------
    SampleError
        If a file cannot be read or understood, or fewer than five stations with sediment remain.
    """
    intake = _Intake()
    for block, label in zip(recipe.samples, _labels([b.file for b in recipe.samples]), strict=True):
        _read_block(block, label, recipe, intake)
    rows = pd.concat(intake.frames, ignore_index=True)
    intake.notes.extend(set_void(rows, recipe.intake))
    stations = _assemble(rows, intake, recipe)
    if stations.counts["stations"] < FEWEST:
        raise _too_few(stations)
    return stations


def _labels(paths: Sequence[Path]) -> list[str]:
    """File names; with their folders where two files share a name."""
    full = [p.absolute() for p in paths]
    labels = [p.name for p in full]
    for name in {n for n in labels if len({p for p in full if p.name == n}) > 1}:
        members = [i for i, n in enumerate(labels) if n == name]
        common = Path(os.path.commonpath([full[i].parent for i in members]))
        for i in members:
            labels[i] = full[i].relative_to(common).as_posix()
    return labels


def _read_block(block: Samples, label: str, recipe: Recipe, intake: _Intake) -> None:
    source = find_source(block, label)
    sheet, table = source.sheet, source.table
    place = (sheet.file, sheet.name)
    if place in intake.rows_read:
        raise SampleError(
            f"{table.where.text()}: given twice in the recipe; take one samples block out or name another sheet"
        )
    intake.rows_read[place] = sheet.filled
    intake.notes.extend((*sheet.notes, *source.notes))
    if sheet.hidden_rows:
        intake.notes.append(f"{table.where.text()}: {sheet.hidden_rows} hidden rows, read like the others")
    frame, notes = read_rows(
        source, block, recipe.intake, recipe.composition.detection_limit, intake.audit, recipe.quantities
    )
    intake.notes.extend(notes)
    intake.frames.append(frame)
    if source.joined is not None:
        bare = bare_places(source.joined, block)
        if len(bare):
            home = source.joined.places.where
            intake.rows_read[(home.file, home.sheet)] = len(bare)
            intake.frames.append(bare)
            intake.notes.append(
                f"{home.text()}: {len(bare)} position rows without results tell of hard ground and are kept as evidence"
            )
    if table.aside:
        numbers, reasons = zip(*table.aside, strict=True)
        fate = {"fate": "not_samples", "reason": reasons, "station": -1}
        intake.aside.append(pd.DataFrame({"file": sheet.file, "sheet": sheet.name, "row": numbers, "id": "", **fate}))


def _assemble(rows: pd.DataFrame, intake: _Intake, recipe: Recipe) -> Stations:
    """Merge repeats and copies and write the account of rows."""
    on_map = rows["fate"].isin(["used", "evidence"]).to_numpy()
    kept = rows[on_map].reset_index(drop=True)
    original, notes = find_copies(kept)
    copies = original >= 0
    for column in ("survey", "longitude", "latitude"):
        kept[column] = kept[column].to_numpy()[np.where(copies, original, np.arange(len(kept)))]
    merged, member = merge_repeats(kept, copies)
    station = np.full(len(rows), -1, dtype=np.int64)
    station[on_map] = member
    fate, reason = (rows[c].to_numpy(dtype=object).copy() for c in ("fate", "reason"))
    follows = ~_leaders(kept, merged, member)
    fate[np.flatnonzero(on_map)[follows]] = "merged"
    heads = merged.iloc[member[follows]]
    what = np.where(copies[follows], "the same sample as", "repeat of")
    reason[np.flatnonzero(on_map)[follows]] = [
        f"{w} row {row} of {file}" for w, row, file in zip(what, heads["row"], heads["file"], strict=True)
    ]
    ledger = rows[["file", "sheet", "row", "id"]].assign(fate=fate, reason=reason, station=station)
    ledger = pd.concat([ledger[list(LEDGER_COLUMNS)], *intake.aside], ignore_index=True)
    ledger = _sorted_ledger(ledger, intake)
    if recipe.quantities:
        merged = merge_quantities(kept, merged, member, recipe.quantities)
        notes += check_found(merged, recipe.quantities, FEWEST)
    further = [c for q in recipe.quantities for c in (q.name, width_name(q.name))]
    table, aged = grow_noise(merged[[*TABLE_COLUMNS, *further]], recipe.intake.noise_per_decade)
    table = _with_points(table)
    notes += [found.text("ln(mud / rest)") for found in _compare_methods(table)]
    deeper = rows.loc[rows["deep"].to_numpy(dtype=bool), list(DEEPER_COLUMNS)].reset_index(drop=True)
    return Stations(table, intake.audit.table(), ledger, intake.rows_read, (*intake.notes, *notes, *aged), deeper)


def _compare_methods(table: pd.DataFrame) -> list[Offset]:
    """Offsets between the methods by which whole samples were measured."""
    mud = np.clip(table["mud"].to_numpy(dtype=np.float64), LEAST_MUD, 1.0 - LEAST_MUD)
    whole = table[["mud", "sand", "gravel"]].notna().all(axis=1).to_numpy() & table["kind"].isin(METHODS).to_numpy()
    lon, lat = (table[name].to_numpy(dtype=np.float64) for name in ("longitude", "latitude"))
    return method_offsets(lon, lat, np.where(whole, np.log(mud / (1.0 - mud)), np.nan), table["kind"].to_numpy())


def _leaders(kept: pd.DataFrame, merged: pd.DataFrame, member: npt.NDArray[np.int64]) -> npt.NDArray[np.bool_]:
    """Whether a row is the one that its station carries in file, sheet and row."""
    same = np.ones(len(kept), dtype=bool)
    for column in ("file", "sheet", "row"):
        same &= kept[column].to_numpy() == merged[column].to_numpy()[member]
    return same


def _sorted_ledger(ledger: pd.DataFrame, intake: _Intake) -> pd.DataFrame:
    order = {place: i for i, place in enumerate(intake.rows_read)}
    place = [order[p] for p in zip(ledger["file"], ledger["sheet"], strict=True)]
    ledger = ledger.assign(_place=place).sort_values(["_place", "row"], kind="stable", ignore_index=True)
    ledger["fate"] = pd.Categorical(ledger["fate"], categories=list(FATES)).astype(object)
    return ledger.drop(columns="_place")


def _too_few(stations: Stations) -> SampleError:
    counts = stations.counts
    reasons = stations.set_aside["reason"].value_counts()
    most = f"; most often because: {reasons.index[0]} ({reasons.iloc[0]} rows)" if len(reasons) else ""
    files = ", ".join(dict.fromkeys(file for file, _ in stations.rows_read))
    return SampleError(
        f"{files}: {counts['stations']} usable stations, expected at least {FEWEST}; of {counts['rows_read']} rows read "
        f"{counts['rows_set_aside']} were set aside{most}"
    )
