"""Two tables that belong together: where samples were taken, and what the laboratory found, joined on an id."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from texture.stations.columns import Column
from texture.stations.files import Cell, is_blank
from texture.stations.headings import role_of
from texture.stations.tables import Table
from texture.stations.where import shown

__all__ = ["POSITION_ROLES", "Joined", "best_ids", "join_tables", "same_id"]


POSITION_ROLES = ("latitude", "longitude", "easting", "northing", "position")


@dataclass(frozen=True)
class Joined:
    """For each row of a table of results, the row of the table of positions it belongs to.

    Parameters
    ----------
    places : Table
    columns : dict role → Column
        Roles of `places`.
    match : int array, shape (n_results,)
        Position in `places`; -1 where the id is not there.
    problem : object array of str, shape (n_results,)
    notes : tuple of str
    """

    places: Table
    columns: dict[str, Column]
    match: npt.NDArray[np.int64]
    problem: npt.NDArray[np.object_]
    notes: tuple[str, ...] = field(default=())


def same_id(cell: Cell) -> str:
    """Text by which ids are compared: without case, spaces and a number's decimals of zero.

    >>> same_id("KB 16-001 "), same_id(7.0), same_id(None)
    ('kb16-001', '7', '')
    """
    if is_blank(cell):
        return ""
    if isinstance(cell, float) and cell.is_integer():
        cell = int(cell)
    return "".join(str(cell).split()).casefold()


def bare_id(cell: Cell) -> str:
    """Letters and digits alone, for ids that two people punctuated each in their own way.

    >>> bare_id("KB-16.001"), bare_id("kb16 001")
    ('kb16001', 'kb16001')
    """
    return "".join(c for c in same_id(cell) if c.isalnum())


def best_ids(results: Table, result_id: Column, places: Table, place_id: Column) -> tuple[Column, Column]:
    """Choose the pair of id columns that meet most often; a column that the recipe names is not exchanged.

    A sheet of results often carries two ids, the laboratory's own and the sampler's.
    """

    def candidates(table: Table, first: Column) -> list[Column]:
        named = [i for i, h in enumerate(table.headings) if (role_of(h) or ("",))[0] == "id" and i != first.index]
        return [first] + ([] if first.named else [Column("id", i, table.headings[i]) for i in named])

    pairs = [(a, b) for a in candidates(results, result_id) for b in candidates(places, place_id)]

    def meetings(as_key: Callable[[Cell], str]) -> list[int]:
        known = {b.index: {as_key(x) for x in places.columns[b.index]} - {""} for _, b in pairs}
        return [sum(as_key(x) in known[b.index] for x in results.columns[a.index]) for a, b in pairs]

    exact = meetings(same_id)
    counts = exact if any(exact) else meetings(bare_id)
    return pairs[counts.index(max(counts))]


def join_tables(results: Table, result_id: Column, places: Table, columns: dict[str, Column]) -> Joined:
    """Find the position row of each result row.

    Several results of one place are welcome; two position rows with one id are not, unless they are alike.

    Raises
    ------
    SampleError
        If an id stands twice among the positions with different entries, or no id is found at all.
    """
    bare = not _meet(results.columns[result_id.index], places.columns[columns["id"].index], same_id) and _meet(
        results.columns[result_id.index], places.columns[columns["id"].index], bare_id
    )
    as_key = bare_id if bare else same_id
    wanted = [as_key(c) for c in results.columns[result_id.index]]
    by_id: dict[str, int] = {}
    place_id = columns["id"]
    matters = [c.index for role, c in columns.items() if role in POSITION_ROLES]
    for i, cell in enumerate(places.columns[place_id.index]):
        key = as_key(cell)
        if not key:
            continue
        first = by_id.setdefault(key, i)
        if first != i and any(places.columns[k][first] != places.columns[k][i] for k in matters):
            raise places.where.at(place_id.heading).error(
                f"{shown(cell)}, which also stands in row {places.rows[first]} with another position",
                "each id once",
                "correct one of the two",
                row=places.rows[i],
            )
    match = np.array([by_id.get(key, -1) for key in wanted], dtype=np.int64)
    if len(match) and not (match >= 0).any():
        raise results.where.at(result_id.heading).error(
            f"{shown(results.columns[result_id.index][0])} and others, none of them in {places.where.text()}",
            f'ids of column "{place_id.heading}" there',
            "name the columns of ids under columns and join",
        )
    problem = np.array(
        [
            ""
            if m >= 0
            else "no id to find its position by"
            if not key
            else f"id {shown(c)} has no position in {places.where.text()}"
            for m, key, c in zip(match, wanted, results.columns[result_id.index], strict=True)
        ],
        dtype=object,
    )
    without = len(places.rows) - len(set(match[match >= 0].tolist()))
    note = f'{results.where.text()}: positions from {places.where.text()} by "{result_id.heading}" = "{place_id.heading}"; {len(places.rows)} position rows'
    if without:
        note += f", {without} of them without results"
    if bare:
        note += "; DOUBT: the ids meet only without their hyphens, dots and other signs"
    return Joined(places, columns, match, problem, (note,))


def _meet(one: list[Cell], other: list[Cell], as_key: Callable[[Cell], str]) -> bool:
    return bool(({as_key(c) for c in one} & {as_key(c) for c in other}) - {""})
