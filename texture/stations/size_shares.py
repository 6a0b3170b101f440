"""From the columns of a size analysis to mud, sand and gravel at the cut sizes of the recipe."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from texture.composition.cumulative import parts_from_weights
from texture.errors import CompositionError
from texture.recipe import Intake, Samples
from texture.stations.audit import AuditLog
from texture.stations.cells import Reading, read_numbers, unreadable_hint
from texture.stations.columns import Column
from texture.stations.headings import is_weight, plain
from texture.stations.limits import ABOUT, OF_LIMIT
from texture.stations.shares import Classes, Shares
from texture.stations.sizes import SAME_LIMIT_PHI, SizeColumn
from texture.stations.splits import shares_of_sand, split_factors
from texture.stations.tables import Table

__all__ = ["shares_from_sizes"]

FloatArray = npt.NDArray[np.float64]
CUMULATIVE = 0.95  # share of rows that must rise steadily to 100 for single sizes to be read as cumulative


def shares_from_sizes(
    table: Table,
    columns: Sequence[SizeColumn],
    block: Samples,
    intake: Intake,
    audit: AuditLog,
    split: Column | None = None,
) -> Shares:
    """Turn size classes into fractions of 1.

    Weights and percents alike are closed to 1 by their sum; percents must sum to 100 within the tolerance first, weights
    to the sheet's own total where it has one. A cut that coincides with a class limit (within 0.03 phi) is summed;
    otherwise the cumulative curve is interpolated.

    Parameters
    ----------
    table : Table
    columns : sequence of SizeColumn
        Coarse to fine.
    block, intake : Samples, Intake
        `basis`, `blank_means`, `mud_below_mm`, `gravel_above_mm` and `sum_tolerance` act here.
    audit : AuditLog
    split : Column, optional
        Column of factors by which the weights of fine classes, weighed on a split, are multiplied.

    Returns
    -------
    shares : Shares
        `resolution` is the rounding of one class over the row's sum times the root of the number of classes.

    Raises
    ------
    SampleError
        If a cut lies outside all classes.
    """
    n = len(table.rows)
    rows = np.asarray(table.rows, dtype=np.int64)
    problem = np.full(n, "", dtype=object)
    amounts, half, given, ends = _amounts(table, columns, block, rows, problem, audit)
    tared = sum(c.tare >= 0 for c in columns)
    told = [f"{table.where.text()}: {tared} size columns less their tare"] if tared else []
    if split is not None:
        factor = split_factors(table, columns, split, block.split_below_mm, problem, told)
        for numbers in (amounts, *ends):
            numbers *= factor
    if any(c.of_sand for c in columns):
        told.append(
            f"{table.where.text()}: {sum(c.of_sand for c in columns)} size columns are percent of the sand: shares of what the others leave"
        )
        for numbers in (amounts, *ends):
            shares_of_sand(columns, numbers)
    good = given & (problem == "")
    limits, amounts, note = _as_classes(table, columns, amounts, good, intake.sum_tolerance)
    negative = (amounts < -1e-9).any(axis=1) & given
    problem[negative & (problem == "")] = "a size class is negative"
    total = amounts.sum(axis=1)
    _check_sums(table, columns, total, given, intake.sum_tolerance, problem)
    used = given & (problem == "")
    parts = np.full((n, 3), np.nan)
    parts[used], cut_notes = _parts(limits, np.maximum(amounts[used], 0.0), intake, table)
    mud, sand, gravel = parts.T
    if block.basis == "below_2mm" and not (np.nan_to_num(gravel[used]) > 0).any():
        gravel = np.full(n, np.nan)
    parts = np.column_stack([mud, sand, gravel])
    parts[parts < 1e-15] = 0.0  # differences of sums, not grains
    resolution = np.where(used, half * math.sqrt(len(columns)) / np.where(total > 0.0, total, np.nan), np.nan)
    notes = [f"{table.where.text()}: mud, sand and gravel from {len(columns)} size columns"]
    notes += [x for x in (note, *cut_notes, *told) if x]
    if (
        block.basis == "whole"
        and limits[0] > -math.inf
        and limits[0] >= -math.log2(intake.gravel_above_mm) - SAME_LIMIT_PHI
    ):
        notes.append(
            f"{table.where.text()}: the coarsest class ends at {2.0 ** -limits[0]:.4g} mm and basis is whole: gravel is taken as none; "
            'say basis = "below_2mm" if the laboratory took it off before'
        )
    low, high = np.full((2, n, 3), np.nan)
    inexact = used & (ends[0] != ends[1]).any(axis=1) & np.isfinite(parts).all(axis=1)
    if inexact.any():
        low[inexact], high[inexact] = _between(table, columns, ends, limits, inexact, intake, parts[inexact])
    classes = Classes(limits, np.maximum(amounts, 0.0), used)
    return Shares(parts[:, 0], parts[:, 1], parts[:, 2], resolution, given, problem, low, high, tuple(notes), classes)


def _between(
    table: Table,
    columns: Sequence[SizeColumn],
    ends: tuple[FloatArray, FloatArray],
    as_read: FloatArray,
    rows: npt.NDArray[np.bool_],
    intake: Intake,
    parts: FloatArray,
) -> tuple[FloatArray, FloatArray]:
    """Limits of the parts of some rows: the parts with every inexact class at its lower, then at its upper end."""
    low, high = parts.copy(), parts.copy()
    for amounts in ends:
        limits, classes, _ = _as_classes(table, columns, amounts, rows, intake.sum_tolerance)
        classes = np.maximum(classes[rows], 0.0)
        told = (classes.sum(axis=1) > 0.0) & np.array_equal(limits, as_read)
        found = _parts(limits, classes[told], intake, table)[0]
        low[told], high[told] = np.minimum(low[told], found), np.maximum(high[told], found)
    return np.maximum(low, 0.0), np.minimum(high, 1.0)


def _amounts(
    table: Table,
    columns: Sequence[SizeColumn],
    block: Samples,
    rows: npt.NDArray[np.int64],
    problem: npt.NDArray[np.object_],
    audit: AuditLog,
) -> tuple[FloatArray, FloatArray, npt.NDArray[np.bool_], tuple[FloatArray, FloatArray]]:
    """Numbers of all size columns, half width of the roundest one, which rows give anything, and the ends of what is inexact."""
    n, k = len(rows), len(columns)
    amounts, half, least, most = np.full((4, n, k), np.nan)
    given = np.zeros(n, dtype=bool)
    for j, column in enumerate(columns):
        cells = table.columns[column.index]
        place = table.where.at(column.heading)
        numbers = read_numbers(cells, place, table.rows)
        below, between, about = (numbers.reading == r for r in (Reading.BELOW, Reading.RANGE, Reading.ABOUT))
        value = np.where(below, OF_LIMIT * numbers.value, numbers.value)
        value = np.where(numbers.reading == Reading.TRACE, 0.0, value)
        empty = np.zeros(n)
        if column.tare >= 0:
            tare = table.where.at(table.headings[column.tare])
            empty = read_numbers(table.columns[column.tare], tare, table.rows).value
            value = value - empty
        width = np.where(between, numbers.half_width, np.where(about, ABOUT * value, 0.0))
        least[:, j] = np.where(below, 0.0, value - width)
        most[:, j] = np.where(below, numbers.value - empty, value + width)
        given |= np.isfinite(value)
        for reading, rule in ((Reading.BELOW, "below a limit: 0.65 of the limit, and anything from 0 to it"), (Reading.TRACE, "trace in a size class: nothing"), (Reading.RANGE, "range: its middle, and anything between its ends"), (Reading.ABOVE, "above a limit: the limit"), (Reading.ABOUT, "about: within a fifth of it"), (Reading.MARKED, "number with a mark or unit: the number")):  # fmt: skip
            hit = [int(i) for i in np.flatnonzero(numbers.reading == reading)]
            audit.add(place, rows[hit], [cells[i] for i in hit], value[hit], rule)
        for i in map(int, np.flatnonzero((numbers.reading == Reading.UNREADABLE) & (problem == ""))):
            problem[i] = f'column "{column.heading}": cannot read {unreadable_hint(cells[i])}'
        amounts[:, j], half[:, j] = value, numbers.half_width
    blank = np.isnan(amounts) & given[:, None]
    if block.blank_means == "zero":
        amounts[blank] = least[blank] = most[blank] = 0.0
    for i in map(int, np.flatnonzero((np.isnan(amounts) & given[:, None]).any(axis=1) & (problem == ""))):
        j = int(np.argmax(np.isnan(amounts[i])))
        problem[i] = f'size class "{columns[j].heading}" is blank; say blank_means = "zero" if that is what blank says'
    left = ~given | (problem != "")
    amounts[left], least[left], most[left] = np.nan, 0.0, 0.0
    return amounts, np.nanmax(np.where(np.isfinite(half), half, 0.0), axis=1), given, (least, most)


def _as_classes(
    table: Table, columns: Sequence[SizeColumn], amounts: FloatArray, used: npt.NDArray[np.bool_], tolerance: float
) -> tuple[FloatArray, FloatArray, str]:
    """Limits (k + 1, phi, coarse to fine, open ends infinite) and amounts of adjoining classes."""
    kinds = {c.meaning for c in columns}
    if kinds <= {"class"}:
        limits = [columns[0].coarse_phi, *(c.fine_phi for c in columns)]
        return np.array(limits), amounts, ""
    sizes = np.array([c.coarse_phi for c in columns if c.meaning != "pan"])
    note = ""
    if kinds <= {"single", "pan"} and "pan" not in kinds:
        rising = _share_rising(amounts[used])
        if max(rising) >= CUMULATIVE:
            kinds = {"finer"} if rising[0] >= rising[1] else {"coarser"}
            note = f"{table.where.text()}: the values of every row run steadily to 100 with size: read as {'passing' if kinds == {'finer'} else 'retained'}, cumulative"
    if kinds <= {"cumulative", "pan"} and "cumulative" in kinds:
        kinds, note = _direction(table, columns, amounts[used])
    if kinds == {"finer"}:
        top = np.where(np.isfinite(amounts[:, :1]), _whole_of(amounts), np.nan)
        steps = np.column_stack([top - amounts[:, :1], -np.diff(amounts, axis=1), amounts[:, -1:]])
        return np.array([-math.inf, *sizes, math.inf]), steps, note
    if kinds == {"coarser"}:
        steps = np.column_stack([amounts[:, :1], np.diff(amounts, axis=1), _whole_of(amounts) - amounts[:, -1:]])
        return np.array([-math.inf, *sizes, math.inf]), steps, note
    if kinds <= {"single", "pan", "class"}:
        # a stack of sieves: what lies on a sieve is coarser than it and passed the one above
        fine = [c.fine_phi for c in columns]
        return (
            np.array([-math.inf, *fine]),
            amounts,
            f"{table.where.text()}: single sizes read as what was retained on each sieve",
        )
    raise table.where.error(
        "size columns of several kinds (" + ", ".join(sorted(kinds)) + ")",
        "one kind",
        "name mud, sand and gravel under columns",
    )


def _direction(table: Table, columns: Sequence[SizeColumn], amounts: FloatArray) -> tuple[set[str], str]:
    """Whether cumulative amounts, whose headings do not say, are cumulated from the coarse or the fine end."""
    steps = np.diff(amounts, axis=1)
    rising, falling = float((steps >= -1e-9).all(axis=1).mean()), float((steps <= 1e-9).all(axis=1).mean())
    if not len(amounts) or max(rising, falling) < CUMULATIVE or rising == falling:
        raise table.where.at(columns[0].heading).error(
            "cumulative amounts that neither rise nor fall with size",
            "one of the two",
            "correct the headings, or name mud, sand and gravel",
        )
    kind = "coarser" if rising > falling else "finer"
    return (
        {kind},
        f"{table.where.text()}: cumulative amounts {'rise to the fine end: read as retained' if kind == 'coarser' else 'fall to the fine end: read as passing'}",
    )


def _share_rising(amounts: FloatArray) -> tuple[float, float]:
    """Share of rows that fall steadily to fine from 100 (passing), or rise steadily to 100 (retained)."""
    if not len(amounts):
        return 0.0, 0.0
    steps = np.diff(amounts, axis=1)
    whole = np.where(amounts.max(axis=1) > 1.5, 100.0, 1.0)
    full = np.abs(amounts.max(axis=1) / whole - 1.0) < 0.02
    falling, rising = (steps <= 1e-9).all(axis=1) & full, (steps >= -1e-9).all(axis=1) & full
    return float(falling.mean()), float(rising.mean())


def _whole_of(amounts: FloatArray) -> FloatArray:
    largest = np.nanmax(amounts, initial=0.0)
    return np.full((len(amounts), 1), 100.0 if largest > 1.5 else 1.0)


def _check_sums(
    table: Table,
    columns: Sequence[SizeColumn],
    total: FloatArray,
    given: npt.NDArray[np.bool_],
    tolerance: float,
    problem: npt.NDArray[np.object_],
) -> None:
    ok = given & (problem == "")
    if not ok.any():
        return
    empty = ok & ~(total > 0.0)
    problem[empty] = "all size classes are zero"
    middle = float(np.median(total[ok]))
    weights = any(is_weight(table.units[c.index]) or is_weight(c.heading) for c in columns)
    whole = next((w for w in (1.0, 100.0) if not weights and abs(middle / w - 1.0) < 0.1), None)
    if whole is None and not weights and all("%" in c.heading or "%" in table.units[c.index] for c in columns):
        whole = 100.0  # said to be percent: sums far from 100 are a mistake, not weights
    stated = _total_column(table, columns)
    if whole is not None and stated is None:
        off = ok & ~empty & (np.abs(total / whole - 1.0) > tolerance + 1e-9)
        for i in map(int, np.flatnonzero(off)):
            problem[i] = f"size classes sum to {total[i]:.5g}, expected {whole:g} ± {tolerance * whole:g}"
    elif stated is not None:
        off = ok & ~empty & np.isfinite(stated) & (np.abs(total - stated) > tolerance * np.abs(stated))
        for i in map(int, np.flatnonzero(off)):
            problem[i] = f"size classes sum to {total[i]:.5g}, the sheet's total says {stated[i]:.5g}"


def _total_column(table: Table, columns: Sequence[SizeColumn]) -> FloatArray | None:
    taken = {c.index for c in columns}
    for index, heading in enumerate(table.headings):
        words = plain(table.lowest[index])
        if index not in taken and (words.startswith(("total", "sum")) or words.endswith(" total")):
            return read_numbers(table.columns[index], table.where.at(heading), table.rows).value
    return None


def _parts(limits: FloatArray, amounts: FloatArray, intake: Intake, table: Table) -> tuple[FloatArray, list[str]]:
    """Mud, sand and gravel of each row, and notes on how the cuts were made."""
    cuts, notes = [], []
    for mm in (intake.mud_below_mm, intake.gravel_above_mm):
        phi = -math.log2(mm)
        nearest = float(limits[np.argmin(np.abs(limits - phi))])
        cuts.append(2.0**-nearest * 1e-3 if abs(nearest - phi) <= SAME_LIMIT_PHI else mm * 1e-3)
        if abs(nearest - phi) > SAME_LIMIT_PHI and limits[np.isfinite(limits)][0] < phi:
            notes.append(f"{table.where.text()}: {mm:.4g} mm lies between class limits: taken from the size curve")
        elif abs(nearest - phi) > 1e-6 and math.isfinite(nearest) and limits[0] < phi:
            notes.append(f"{table.where.text()}: cut at {2.0**-nearest:.4g} mm for {mm:.4g} mm")
    try:
        return parts_from_weights(limits, amounts, cuts), notes
    except CompositionError as error:
        raise table.where.error(
            f"size classes that cannot be cut at {intake.mud_below_mm:g} and {intake.gravel_above_mm:g} mm ({error})",
            "classes on both sides of the cuts",
            "set intake.mud_below_mm and intake.gravel_above_mm to limits of the classes",
        ) from error
