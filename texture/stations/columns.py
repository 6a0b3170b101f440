"""Which column plays which role: the recipe's word first, then the heading, checked against the content."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass

from texture.stations.files import Cell, is_blank
from texture.stations.headings import PARTS, is_tare, plain, role_of, unit_in
from texture.stations.tables import Table, looks_like_value
from texture.stations.where import Where

__all__ = ["Column", "assign_columns"]

LOOKED_AT = 400  # cells of a column whose content is looked at
# Roles whose double would change the result are never chosen between silently.
_STRICT = frozenset(("latitude", "longitude", "easting", "northing", *PARTS))
_NUMERIC = _STRICT | {"depth", "sample_top", "sample_bottom", "median_size"}


@dataclass(frozen=True)
class Column:
    """One column of a table with the role it plays.

    Parameters
    ----------
    role : str
    index : int
        Column number from 0.
    heading : str
    unit : str or None
        Unit named in the heading or the units row.
    named : bool
        Whether the recipe named it.
    """

    role: str
    index: int
    heading: str
    unit: str | None = None
    named: bool = False


def assign_columns(table: Table, mapped: Mapping[str, str]) -> dict[str, Column]:
    """Assign roles to the columns of a table.

    Parameters
    ----------
    table : Table
    mapped : mapping role → heading
        The recipe's `columns`; taken as it says, whatever the content.

    Returns
    -------
    columns : dict role → Column

    Raises
    ------
    SampleError
        If a mapped heading is not in the table (the nearest one is named) or stands there twice, or if two
        columns of equal standing claim a role that matters.
    """
    columns = {role: _mapped(table, role, heading) for role, heading in mapped.items()}
    taken = {column.index for column in columns.values()}
    claims: dict[str, list[tuple[int, Column]]] = {}
    for index in range(len(table.headings)):
        found = None if index in taken else _recognise(table, index)
        if found is not None and found[0] not in columns:
            role, weight = found
            claims.setdefault(role, []).append((weight, _column(table, role, index)))
    for role, candidates in claims.items():
        columns[role] = _choose(table.where, role, candidates)
    return _pairs(columns)


def _recognise(table: Table, index: int) -> tuple[str, int] | None:
    """Role from the lowest header line or the whole heading, if the content does not speak against it."""
    tries = [role_of(table.headings[index])]
    if table.lowest[index] != table.headings[index]:
        # "Position Latitude": the lower line is the column's own name, the upper one its group's.
        tries.insert(0, role_of(table.lowest[index]))
    found = next((t for t in tries if t is not None), None)
    if found is None or not _content_agrees(*found, table.columns[index]):
        return None
    if found[0] in PARTS and is_tare(table.headings[index]):
        return f"{found[0]}_tare", found[1]
    return found


def _content_agrees(role: str, weight: int, cells: list[Cell]) -> bool:
    filled = [c for c in cells[:LOOKED_AT] if not is_blank(c)]
    if not filled:
        return role not in _STRICT or role in PARTS
    if role in _NUMERIC:
        # "no recovery", "trace" and notes may fill much of a column that its heading names plainly
        least = 0.0 if weight >= 3 and role in _STRICT else 0.5 * len(filled)
        return sum(looks_like_value(c) for c in filled) > least
    if role == "date":
        return any(looks_like_value(c) for c in filled)
    if role in ("description", "remarks"):
        return any(isinstance(c, str) and not looks_like_value(c) for c in filled)
    return True


def _column(table: Table, role: str, index: int, named: bool = False) -> Column:
    unit = unit_in(table.units[index]) or unit_in(table.headings[index])
    return Column(role, index, table.headings[index], unit, named)


def _choose(where: Where, role: str, candidates: list[tuple[int, Column]]) -> Column:
    heaviest = max(weight for weight, _ in candidates)
    best = [column for weight, column in candidates if weight == heaviest]
    if len(best) > 1 and role in PARTS:
        best = [c for c in best if c.unit not in ("g", "mm", "um", "phi")] or best
        best = [c for c in best if c.unit in ("percent", "fraction")] or best
    if len(best) > 1 and role in _STRICT:
        names = " and ".join(f'"{c.heading}"' for c in best)
        raise where.error(f"two columns for {role}, {names}", "one", f'choose with columns.{role} = "…" in the recipe')
    return best[0]


def _mapped(table: Table, role: str, heading: str) -> Column:
    def same(a: str, b: str) -> bool:
        return " ".join(a.split()).casefold() == " ".join(b.split()).casefold()

    for names in (table.headings, table.lowest):
        hits = [i for i, name in enumerate(names) if same(name, heading)]
        hits = hits or [i for i, name in enumerate(names) if name and plain(name) == plain(heading)]
        if len(hits) > 1:
            raise table.where.at(heading).error(
                f"this heading {len(hits)} times", "once", f"make the headings differ, or name another one for {role}"
            )
        if hits:
            return _column(table, role, hits[0], named=True)
    known = [name for name in dict.fromkeys(table.headings) if name]
    near = difflib.get_close_matches(heading, known, n=1, cutoff=0.4)
    hint = f'did you mean "{near[0]}"?' if near else "headings there: " + ", ".join(f'"{k}"' for k in known[:12])
    raise table.where.error(f'no column "{heading}"', f"the heading that the recipe gives for {role}", hint)


def _pairs(columns: dict[str, Column]) -> dict[str, Column]:
    """Drop half a pair of hinted coordinates: a lone "N" or "E" column is a count or a remark."""
    for one, other in (("easting", "northing"), ("northing", "easting")):
        if one in columns and other not in columns and not columns[one].named:
            del columns[one]
    return columns
