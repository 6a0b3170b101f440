"""The fate of each row below a header: used, evidence of hard ground, set aside with a reason, or no sample."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from texture.composition.words import read_words
from texture.stations.audit import AuditLog
from texture.stations.bottoms import is_hard_ground, is_substrate, is_total
from texture.stations.files import Cell, is_blank
from texture.stations.headings import PARTS
from texture.stations.joins import POSITION_ROLES
from texture.stations.positions import Positions
from texture.stations.shares import Shares
from texture.stations.sources import Source
from texture.stations.tables import looks_like_value
from texture.stations.where import shown

__all__ = ["Fates", "judge", "words_of"]

ObjectArray = npt.NDArray[np.object_]
NO_SHARES = "no share of mud, sand or gravel"


@dataclass(frozen=True)
class Fates:
    """Fate and reason of each row, and the class that its words name where it was not measured.

    Parameters
    ----------
    fate, reason : object array of str, shape (n,)
    described : object array of str, shape (n,)
        Folk's code for rows used on the strength of their words; empty elsewhere.
    """

    fate: ObjectArray
    reason: ObjectArray
    described: ObjectArray


def judge(
    source: Source, positions: Positions, shares: Shares, median_phi: npt.NDArray[np.float64], audit: AuditLog
) -> Fates:
    """Judge every row; only those that are not plainly used are looked at one by one."""
    n = len(source.table.rows)
    fates = Fates(*(np.full(n, text, dtype=object) for text in ("used", "", "")))
    placed = np.isfinite(positions.longitude) & np.isfinite(positions.latitude)
    informed = np.isfinite(shares.mud) | np.isfinite(shares.sand) | np.isfinite(shares.gravel)
    informed |= np.isfinite(median_phi)
    for i in map(int, np.flatnonzero(~(placed & informed & (shares.problem == "")))):
        cells = [column[i] for column in source.table.columns]
        if not placed[i]:
            fates.fate[i], fates.reason[i] = _without_place(source, cells, bool(shares.given[i]), positions.problem[i])
        elif informed[i] or "sum" in shares.problem[i]:
            fates.fate[i], fates.reason[i] = ("set_aside", shares.problem[i]) if shares.problem[i] else ("used", "")
        else:
            _told_in_words(source, i, cells, shares.problem[i], fates, audit)
    return fates


def _without_place(source: Source, cells: list[Cell], given: bool, problem: str) -> tuple[str, str]:
    roles = ("id",) if source.joined is not None else POSITION_ROLES
    matters = [c.index for role, c in source.columns.items() if role in (*PARTS, *roles)]
    matters += [c.index for c in source.sizes]
    texts = [c.strip() for c in cells if isinstance(c, str) and c.strip()]
    if texts and is_total(texts[0]):
        return "not_samples", "total or mean line"
    # A line of one or two words, such as "nd: not determined", explains the table.
    short = sum(not is_blank(c) for c in cells) <= 2 and not any(looks_like_value(c) for c in cells)
    if all(is_blank(cells[k]) for k in matters) or (short and not given):
        return "not_samples", "note"
    return "set_aside", problem or "no position"


def _told_in_words(source: Source, i: int, cells: list[Cell], problem: str, fates: Fates, audit: AuditLog) -> None:
    """Judge a placed row without shares by what it says: hard ground, old ground, a kind of sediment, or nothing."""
    home = source.joined
    everything = list(cells)
    if home is not None and home.match[i] >= 0:
        everything += [column[home.match[i]] for column in home.places.columns]
    if is_hard_ground(words_of(everything)):
        fates.fate[i], fates.reason[i] = "evidence", words_of(everything)
        return
    fates.fate[i], fates.reason[i] = "set_aside", problem or NO_SHARES
    for role in ("description", "remarks"):
        column = source.columns.get(role)
        cell = cells[column.index] if column is not None else None
        if column is None or not isinstance(cell, str) or not cell.strip():
            continue
        if is_substrate(cell):
            fates.reason[i] = f"{shown(cell)} is old, firm ground and no sediment of the present bed"
            return
        found = read_words(cell)
        if found is not None:
            fates.fate[i], fates.reason[i], fates.described[i] = "used", "", found.code
            rule = f"words, {found.language}: Folk's class" if found.language != "code" else "code: Folk's class"
            audit.add(source.table.where.at(column.heading), [source.table.rows[i]], [cell], [found.code], rule)
            return
        if role == "description" and not problem:
            fates.reason[i] = f"{shown(cell)} is no kind of sediment that is understood"


def words_of(cells: list[Cell]) -> str:
    """Texts with letters of a row, one after the other."""
    return " · ".join(c.strip() for c in cells if isinstance(c, str) and any(ch.isalpha() for ch in c))
