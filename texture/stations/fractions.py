"""From what the part columns say to fractions of 1: unit, mud from silt and clay, completion, closing.

What is not exact (`<1`, `5-10`) keeps its limits beside a point (`texture.stations.limits`). Closing follows the multiplicative
replacement of Martín-Fernández et al. (2003): a part below a limit keeps its point and the other parts are scaled
together, so that their ratios stay.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt

from texture.recipe import Samples
from texture.stations.audit import AuditLog
from texture.stations.cells import Numbers, Reading, unreadable_hint
from texture.stations.columns import Column
from texture.stations.files import Cell
from texture.stations.limits import Part, limit_rows, move_within, read_part
from texture.stations.shares import Shares
from texture.stations.units import DIVISORS, UNITS, find_unit
from texture.stations.where import Where, shown

__all__ = ["share_out"]

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

MOST_ABOVE, MOST_ABOVE_SHARE = 2, 0.1  # rows with a share above 1 that are slips of the pen rather than another unit
BINARY_NOISE = 1e-12  # sums of typed decimals differ from 1 by this much in binary
THREE = ("mud", "sand", "gravel")


def share_out(
    numbers: Mapping[str, Numbers],
    cells: Mapping[str, Sequence[Cell]],
    columns: Mapping[str, Column],
    block: Samples,
    where: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    placed: BoolArray | None = None,
    sum_tolerance: float = 0.02,
    detection_limit: float = 0.005,
) -> Shares:
    """Turn part columns (any of mud, sand, gravel, silt, clay) into fractions of 1.

    Parameters
    ----------
    numbers, cells, columns : mapping part → Numbers, raw cells, Column
    block : Samples
        Its `unit`, `basis` and `blank_means` act here.
    where : Where
    rows : int array, shape (n,)
    audit : AuditLog
        Receives a row for each reading that is not plain, each completion and each closing.
    placed : bool array, shape (n,), optional
        Rows that have a position; only in these is a share above 1 looked at, for totals stand in the others.
    sum_tolerance : float
        Rows whose parts sum outside 1 ± this are refused.
    detection_limit : float
        Half of it stands for a trace.

    Raises
    ------
    SampleError
        If parts of more than a few rows are more than 1 (100 %) beyond the tolerance.
    """
    unit, note = find_unit(numbers, columns, block.unit, where)
    n = len(rows)
    problem = np.full(n, "", dtype=object)
    given = np.zeros(n, dtype=bool)
    parts: dict[str, Part] = {}
    for role, column in numbers.items():
        part = read_part(column, DIVISORS[unit], detection_limit)
        parts[role] = part
        place = where.at(columns[role].heading)
        given |= (column.reading > Reading.MISSING) | (column.reading == Reading.PLAIN)
        if unit != "weight":
            checked = part.value if placed is None else np.where(placed, part.value, np.nan)
            _above_one(checked, cells[role], sum_tolerance, unit, place, rows, problem)
        _note_readings(column, part.value, cells[role], place, rows, audit)
        unreadable = column.reading == Reading.UNREADABLE
        for i in map(int, np.flatnonzero(unreadable & (problem == ""))):
            problem[i] = f'column "{columns[role].heading}": cannot read {unreadable_hint(cells[role][i])}'
        negative = part.value < 0.0
        problem[negative & (problem == "")] = f'column "{columns[role].heading}": a negative share'
    if block.blank_means == "zero":
        measured = np.any([np.isfinite(p.value) for p in parts.values()], axis=0)
        for role, part in parts.items():
            fill = measured & np.isnan(part.value) & (numbers[role].reading <= Reading.MISSING)
            part.value[fill] = 0.0
            audit.add(
                where.at(columns[role].heading),
                rows[fill],
                [""] * int(fill.sum()),
                ["0"] * int(fill.sum()),
                "blank means zero in this survey",
            )
    row = _three(parts, n, columns, where, rows, audit, problem, sum_tolerance)
    if unit == "weight":
        _weigh(row, problem, given, block.basis)
    _complete(row, block.basis, where, rows, audit, problem)
    _close(row, block.basis, sum_tolerance, where, rows, audit, problem)
    values = row.value
    resolution = np.fmax.reduce([np.where(np.isfinite(values[:, k]), row.half[:, k], np.nan) for k in range(3)])
    if unit == "weight":
        resolution[:] = np.nan  # a balance's digits say little about the share
    values[problem != ""] = np.nan
    low, high = limit_rows(values, row.low, row.high, row.half, row.small)
    fines = (block.basis == "below_2mm") & np.isnan(values[:, 2])  # shares of what passed 2 mm: no limits of the whole
    low[fines], high[fines] = np.nan, np.nan
    notes = (note,) if note else (f"{where.text()}: parts read as {UNITS[unit]}",)
    return Shares(values[:, 0], values[:, 1], values[:, 2], resolution, given, problem, low, high, notes)


def _above_one(
    value: FloatArray,
    cells: Sequence[Cell],
    tolerance: float,
    unit: str,
    place: Where,
    rows: npt.NDArray[np.int64],
    problem: npt.NDArray[np.object_],
) -> None:
    """Set aside the odd row with a share above 1; refuse a column of them, for then its unit or heading is wrong."""
    above = np.flatnonzero(value > 1.0 + tolerance)
    if not len(above):
        return
    whole = "1" if unit == "fraction" else "100 %" if unit == "percent" else "1000 ‰"
    known = int(np.isfinite(value).sum())
    if len(above) > max(MOST_ABOVE, MOST_ABOVE_SHARE * known) or 2 * len(above) > known:
        hint = 'or say unit = "percent"' if unit == "fraction" else "or name the right column"
        many = f" and {len(above) - 1} more like it" if len(above) > 1 else ""
        i = int(above[0])
        raise place.error(
            shown(cells[i]) + many, f"a share of at most {whole}", f"correct the cell, {hint}", row=int(rows[i])
        )
    for i in above[problem[above] == ""]:
        problem[i] = f'column "{place.column}": {shown(cells[i])} is more than {whole}'


_RULES = {
    Reading.MISSING: "says that there is no value: not measured",
    Reading.BELOW: "below a limit: 0.65 of the limit, and anything from 0 to it",
    Reading.ABOVE: "above a limit: halfway from the limit to 1, and anything between",
    Reading.TRACE: "trace: half of composition.detection_limit, and anything from 0 to it",
    Reading.RANGE: "range: its middle, and anything between its ends",
    Reading.ABOUT: "about: within a fifth of it",
    Reading.MARKED: "number with a mark or unit: the number",
}


def _note_readings(
    column: Numbers,
    value: FloatArray,
    cells: Sequence[Cell],
    place: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
) -> None:
    for reading, rule in _RULES.items():
        hit = [int(i) for i in np.flatnonzero(column.reading == reading)]
        audit.add(place, rows[hit], [cells[i] for i in hit], value[hit], rule)


def _three(
    parts: Mapping[str, Part],
    n: int,
    columns: Mapping[str, Column],
    where: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    problem: npt.NDArray[np.object_],
    tolerance: float,
) -> Part:
    """Put mud, sand, gravel side by side, shape (n, 3); silt and clay make mud where mud itself is not given."""
    none = np.full(n, np.nan)
    blank = Part(none, none, none, none, np.zeros(n, dtype=bool))
    three = [parts.get(role, blank) for role in THREE]
    if "silt" in parts and "clay" in parts:
        both, mud = parts["silt"].plus(parts["clay"]), three[0]
        use = np.isnan(mud.value) & np.isfinite(both.value)
        three[0] = Part(
            *(np.where(use, getattr(both, f), getattr(mud, f)) for f in ("value", "low", "high", "half", "small"))
        )
        place = where.at(f"{columns['silt'].heading} + {columns['clay'].heading}")
        silt, clay = parts["silt"].value, parts["clay"].value
        old = [f"{a:.7g} + {b:.7g}" for a, b in zip(silt[use], clay[use], strict=True)]
        audit.add(place, rows[use], old, both.value[use], "silt + clay is mud")
        differ = ~use & np.isfinite(both.value) & (np.abs(both.value - mud.value) > tolerance)
        for i in np.flatnonzero(differ & (problem == "")):
            problem[i] = f"mud {mud.value[i]:.4g} is not silt + clay {both.value[i]:.4g}"
    return Part(*(np.column_stack([getattr(p, f) for p in three]) for f in ("value", "low", "high", "half", "small")))


def _weigh(row: Part, problem: npt.NDArray[np.object_], given: BoolArray, basis: str) -> None:
    """Turn weights into fractions where everything that was weighed is there."""
    value = row.value
    needed = value if basis == "whole" else value[:, :2]
    whole = needed.sum(axis=1)
    good = np.isfinite(whole) & (whole > 0.0)
    divisor = whole if basis == "whole" else np.where(np.isnan(value[:, 2]), whole, value.sum(axis=1))
    for numbers in (row.value, row.low, row.high):
        numbers[good] /= divisor[good, None]
    np.minimum(row.high, 1.0, out=row.high)
    row.half[:] = 0.0  # a balance's digits say little about the share
    bad = given & ~good & (problem == "")
    problem[bad] = "weights need all parts to make fractions"
    value[bad] = np.nan


def _complete(
    row: Part,
    basis: str,
    where: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    problem: npt.NDArray[np.object_],
) -> None:
    """Fill the one missing part where the whole sample was seen; what the others leave open, it leaves open too."""
    if basis != "whole":
        return
    value = row.value
    missing = np.isnan(value)
    one = (missing.sum(axis=1) == 1) & (problem == "")
    inexact = np.isfinite(row.low)
    least = np.nansum(np.where(inexact, row.low, value), axis=1)
    most = np.nansum(np.where(inexact, row.high, value), axis=1)
    rest = 1.0 - np.nansum(value, axis=1)
    for k, name in enumerate(THREE):
        fill = one & missing[:, k]
        rest_k = np.where(np.abs(rest[fill]) < BINARY_NOISE, 0.0, rest[fill])
        value[fill, k] = np.maximum(rest_k, 0.0)
        open_ = fill & inexact.any(axis=1)
        row.low[open_, k], row.high[open_, k] = (
            np.maximum(1.0 - most, 0.0)[open_],
            np.clip(1.0 - least, 0.0, 1.0)[open_],
        )
        audit.add(
            where.at(name),
            rows[fill],
            [""] * int(fill.sum()),
            value[fill, k],
            "the one missing part of a whole sample: what is left to 1",
        )


def _close(
    row: Part,
    basis: str,
    tolerance: float,
    where: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    problem: npt.NDArray[np.object_],
) -> None:
    """Close rows to 1 within the tolerance; limits keep their value, all other parts are scaled together."""
    value, small, half = row.value, row.small, row.half
    known = np.isfinite(value)
    complete = known.all(axis=1)
    below_2mm = (basis == "below_2mm") & known[:, 0] & known[:, 1]
    if basis == "below_2mm":  # gravel as a share of all, mud and sand as shares of what passed 2 mm
        fine = value[:, 0] + value[:, 1]
        scale = complete & (np.abs(fine - 1.0) <= tolerance) & (value[:, 2] > tolerance) & (problem == "")
        factor = (1.0 - value[scale, 2]) / fine[scale]
        old = fine[scale]
        for numbers in (value, row.low, row.high):
            numbers[scale, :2] *= factor[:, None]
        audit.add(
            where.at("mud + sand"),
            rows[scale],
            old,
            value[scale, :2].sum(axis=1),
            "shares of what passed 2 mm: scaled by 1 - gravel",
        )
    loose = np.isfinite(row.low) & ~small
    ranged = complete & loose.any(axis=1) & (problem == "")
    if ranged.any():
        before = value.copy()
        moved = move_within(value, row.low, row.high, loose & ranged[:, None])
        for k, name in enumerate(THREE):
            hit = moved[:, k] & (np.abs(value[:, k] - before[:, k]) > BINARY_NOISE)
            audit.add(
                where.at(name), rows[hit], before[hit, k], value[hit, k], "moved within its limits: the row sums to 1"
            )
    total = np.where(known, value, 0.0).sum(axis=1)
    fixed = np.where(small & known, value, 0.0).sum(axis=1)
    slack = tolerance + np.where(small & known, half, 0.0).sum(axis=1) + BINARY_NOISE
    closes = (complete | below_2mm) & (problem == "")
    off = closes & (np.abs(total - 1.0) > slack)
    over = ~closes & known.any(axis=1) & (total > 1.0 + tolerance) & (problem == "")
    for i in np.flatnonzero(off | over):
        problem[i] = f"parts sum to {total[i]:.4g}, expected 1 ± {tolerance:g}"
    scaled = total - fixed
    empty = closes & ~off & (scaled <= 0.0)
    problem[empty] = "only limits and traces, nothing measured"
    todo = closes & ~off & ~empty & (np.abs(total - 1.0) > BINARY_NOISE)
    factor = np.ones(len(value))
    factor[todo] = (1.0 - fixed[todo]) / scaled[todo]
    value[:] = np.where(small, value, value * factor[:, None])
    audit.add(
        where.at("mud + sand + gravel"),
        rows[todo],
        total[todo],
        np.ones(int(todo.sum())),
        "closed to 1; limits keep their value",
    )
