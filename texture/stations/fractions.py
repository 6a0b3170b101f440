"""From what the part columns say to fractions of 1: unit, mud from silt and clay, completion, closing.

Limits follow the multiplicative replacement of Martín-Fernández et al. (2003): `<1 %` becomes 0.65 of the
limit and the other parts are scaled together, so that their ratios stay.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from texture.recipe import Samples
from texture.stations.audit import AuditLog
from texture.stations.cells import Numbers, Reading, unreadable_hint
from texture.stations.columns import Column
from texture.stations.files import Cell
from texture.stations.units import DIVISORS, UNITS, find_unit
from texture.stations.where import Where, shown

__all__ = ["OF_LIMIT", "Shares", "no_shares", "share_out"]

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

OF_LIMIT = 0.65  # share of a limit that stands for "below it" (Martín-Fernández et al. 2003)
OF_DETECTION = 0.5  # share of the detection limit that stands for "trace"
BINARY_NOISE = 1e-12  # sums of typed decimals differ from 1 by this much in binary
THREE = ("mud", "sand", "gravel")


@dataclass(frozen=True)
class Shares:
    """Fractions of 1 for each row; NaN where a part is not known.

    Parameters
    ----------
    mud, sand, gravel : float array, shape (n,)
        Close to 1 where all three are known. Mud and sand without gravel are shares of what passed 2 mm.
    resolution : float array, shape (n,)
        Largest half width among the parts given: rounding, or half of a range.
    given : bool array, shape (n,)
        Whether the row gives any part at all, readable or not.
    problem : object array of str, shape (n,)
        Why the row cannot be used; empty where it can.
    notes : tuple of str
    """

    mud: FloatArray
    sand: FloatArray
    gravel: FloatArray
    resolution: FloatArray
    given: BoolArray
    problem: npt.NDArray[np.object_]
    notes: tuple[str, ...] = ()


def no_shares(n: int) -> Shares:
    """Shares of a table that gives none, only words."""
    mud, sand, gravel, resolution = np.full((4, n), np.nan)
    return Shares(mud, sand, gravel, resolution, np.zeros(n, dtype=bool), np.full(n, "", dtype=object))


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
        Rows that have a position; only in these is a share above 1 refused, for totals stand in the others.
    sum_tolerance : float
        Rows whose parts sum outside 1 ± this are refused.
    detection_limit : float
        Half of it stands for a trace.

    Raises
    ------
    SampleError
        If a single part is more than 1 (100 %) beyond the tolerance.
    """
    unit, note = find_unit(numbers, columns, block.unit, where)
    n = len(rows)
    problem = np.full(n, "", dtype=object)
    given = np.zeros(n, dtype=bool)
    parts: dict[str, _Part] = {}
    for role, column in numbers.items():
        part = _one_part(column, unit, detection_limit)
        parts[role] = part
        place = where.at(columns[role].heading)
        given |= (column.reading > Reading.MISSING) | (column.reading == Reading.PLAIN)
        if unit != "weight":
            checked = part.value if placed is None else np.where(placed, part.value, np.nan)
            _refuse_above_one(checked, cells[role], sum_tolerance, unit, place, rows)
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
    values, small, half = _three(parts, n, columns, where, rows, audit, problem, sum_tolerance)
    if unit == "weight":
        _weigh(values, problem, given, block.basis)
    _complete(values, small, block.basis, where, rows, audit, problem)
    _close(values, small, half, block.basis, sum_tolerance, where, rows, audit, problem)
    resolution = np.fmax.reduce([np.where(np.isfinite(values[:, k]), half[:, k], np.nan) for k in range(3)])
    if unit == "weight":
        resolution[:] = np.nan  # a balance's digits say little about the share
    values[problem != ""] = np.nan
    notes = (note,) if note else (f"{where.text()}: parts read as {UNITS[unit]}",)
    return Shares(values[:, 0], values[:, 1], values[:, 2], resolution, given, problem, notes)


@dataclass(frozen=True)
class _Part:
    """One part column in fractions: value, whether it stands for a limit or trace, half width."""

    value: FloatArray
    small: BoolArray
    half: FloatArray


def _one_part(column: Numbers, unit: str, detection_limit: float) -> _Part:
    divisor = DIVISORS[unit]
    value, half = column.value / divisor, column.half_width / divisor
    below, trace, above = (column.reading == r for r in (Reading.BELOW, Reading.TRACE, Reading.ABOVE))
    half = np.where(below, OF_LIMIT * value, half)
    value = np.where(below, OF_LIMIT * value, value)
    half = np.where(above, (1.0 - value) / 2, half)
    value = np.where(above & (value < 1.0), (1.0 + value) / 2, value)
    value = np.where(trace, OF_DETECTION * detection_limit, value)
    half = np.where(trace, OF_DETECTION * detection_limit, half)
    return _Part(value, below | trace, half)


def _refuse_above_one(
    value: FloatArray, cells: Sequence[Cell], tolerance: float, unit: str, place: Where, rows: npt.NDArray[np.int64]
) -> None:
    above = value > 1.0 + tolerance
    if above.any():
        i = int(np.argmax(above))
        whole = "1" if unit == "fraction" else "100 %" if unit == "percent" else "1000 ‰"
        hint = 'or say unit = "percent"' if unit == "fraction" else "or name the right column"
        raise place.error(shown(cells[i]), f"a share of at most {whole}", f"correct the cell, {hint}", row=int(rows[i]))


_RULES = {
    Reading.MISSING: "says that there is no value: not measured",
    Reading.BELOW: "below a limit: 0.65 of the limit",
    Reading.ABOVE: "above a limit: halfway from the limit to 1",
    Reading.TRACE: "trace: half of composition.detection_limit",
    Reading.RANGE: "range: its middle",
    Reading.ABOUT: "about: the number itself",
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
    parts: Mapping[str, _Part],
    n: int,
    columns: Mapping[str, Column],
    where: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    problem: npt.NDArray[np.object_],
    tolerance: float,
) -> tuple[FloatArray, BoolArray, FloatArray]:
    """Put mud, sand, gravel side by side; silt and clay make mud where mud itself is not given."""
    value, half = np.full((n, 3), np.nan), np.full((n, 3), np.nan)
    small = np.zeros((n, 3), dtype=bool)
    for k, role in enumerate(THREE):
        if role in parts:
            value[:, k], small[:, k], half[:, k] = parts[role].value, parts[role].small, parts[role].half
    if "silt" in parts and "clay" in parts:
        silt, clay = parts["silt"], parts["clay"]
        both = silt.value + clay.value
        use = np.isnan(value[:, 0]) & np.isfinite(both)
        value[use, 0], half[use, 0] = both[use], (silt.half + clay.half)[use]
        small[use, 0] = (silt.small & clay.small)[use]
        place = where.at(f"{columns['silt'].heading} + {columns['clay'].heading}")
        old = [f"{a:.7g} + {b:.7g}" for a, b in zip(silt.value[use], clay.value[use], strict=True)]
        audit.add(place, rows[use], old, both[use], "silt + clay is mud")
        differ = ~use & np.isfinite(both) & (np.abs(both - value[:, 0]) > tolerance)
        for i in np.flatnonzero(differ & (problem == "")):
            problem[i] = f"mud {value[i, 0]:.4g} is not silt + clay {both[i]:.4g}"
    return value, small, half


def _weigh(value: FloatArray, problem: npt.NDArray[np.object_], given: BoolArray, basis: str) -> None:
    """Turn weights into fractions where everything that was weighed is there."""
    needed = value if basis == "whole" else value[:, :2]
    whole = needed.sum(axis=1)
    good = np.isfinite(whole) & (whole > 0.0)
    value[good] /= (whole if basis == "whole" else np.where(np.isnan(value[:, 2]), whole, value.sum(axis=1)))[
        good, None
    ]
    bad = given & ~good & (problem == "")
    problem[bad] = "weights need all parts to make fractions"
    value[bad] = np.nan


def _complete(
    value: FloatArray,
    small: BoolArray,
    basis: str,
    where: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    problem: npt.NDArray[np.object_],
) -> None:
    """Fill the one missing part where the whole sample was seen."""
    if basis != "whole":
        return
    missing = np.isnan(value)
    one = (missing.sum(axis=1) == 1) & (problem == "")
    rest = 1.0 - np.nansum(value, axis=1)
    for k, name in enumerate(THREE):
        fill = one & missing[:, k]
        rest_k = np.where(np.abs(rest[fill]) < BINARY_NOISE, 0.0, rest[fill])
        value[fill, k] = np.maximum(rest_k, 0.0)
        audit.add(
            where.at(name),
            rows[fill],
            [""] * int(fill.sum()),
            value[fill, k],
            "the one missing part of a whole sample: what is left to 1",
        )


def _close(
    value: FloatArray,
    small: BoolArray,
    half: FloatArray,
    basis: str,
    tolerance: float,
    where: Where,
    rows: npt.NDArray[np.int64],
    audit: AuditLog,
    problem: npt.NDArray[np.object_],
) -> None:
    """Close rows to 1 within the tolerance; limits keep their value, all other parts are scaled together."""
    known = np.isfinite(value)
    complete = known.all(axis=1)
    below_2mm = (basis == "below_2mm") & known[:, 0] & known[:, 1]
    if basis == "below_2mm":  # gravel as a share of all, mud and sand as shares of what passed 2 mm
        fine = value[:, 0] + value[:, 1]
        scale = complete & (np.abs(fine - 1.0) <= tolerance) & (value[:, 2] > tolerance) & (problem == "")
        factor = (1.0 - value[scale, 2]) / fine[scale]
        old = fine[scale]
        value[scale, :2] *= factor[:, None]
        audit.add(
            where.at("mud + sand"),
            rows[scale],
            old,
            value[scale, :2].sum(axis=1),
            "shares of what passed 2 mm: scaled by 1 - gravel",
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
