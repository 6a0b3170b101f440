"""Median grain size, in phi, from a column whose unit is stated or can be told beyond doubt."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from texture.stations.audit import AuditLog
from texture.stations.cells import Reading, read_numbers
from texture.stations.entries import home_of
from texture.stations.headings import plain
from texture.stations.shares import Shares
from texture.stations.sources import Source

__all__ = ["medians_of", "unit_of_sizes"]

FloatArray = npt.NDArray[np.float64]
NAMES = {"phi": "phi", "mm": "mm", "um": "µm"}
BOUNDS = {"phi": (-12.0, 14.0), "mm": (6e-5, 4096.0), "um": (0.06, 4.1e6)}  # clay to boulders
MUD_MM = 0.0625
FEWEST = 5  # rows with shares that must agree with a unit before it is believed
AGREEING = 0.9


def medians_of(source: Source, shares: Shares, notes: list[str], audit: AuditLog) -> FloatArray:
    """Median size of each row in phi = -log2(diameter / 1 mm) (Krumbein 1934); NaN where there is none.

    Where no heading tells the unit it is told by the values, or by the rows that also know their mud; a column that could
    be either phi or mm is left unread, with a note. A mean size in phi stands in for a median that is not given.
    """
    home = home_of(source, "median_size")
    n = len(source.table.rows)
    if home is None:
        return np.full(n, np.nan)
    table, column, match = home
    place = table.where.at(column.heading)
    cells = table.columns[column.index]
    numbers = read_numbers(cells, place, table.rows)
    value = np.where(np.isin(numbers.reading, (Reading.BELOW, Reading.ABOVE)), np.nan, numbers.value)
    rows = np.asarray(table.rows, dtype=np.int64)
    mud = shares.mud if match is None else np.full(len(value), np.nan)
    unit = column.unit if column.unit in NAMES else None
    told = ""
    if unit is None:
        unit, told = unit_of_sizes(value, mud)
    mean = "mean" in plain(column.heading) or plain(column.heading).startswith("mz")
    if unit is None or (mean and unit != "phi"):
        why = "a mean size in mm or µm is no median" if unit else "no heading tells its unit, and it may be phi or mm"
        notes.append(f"{place.text()}: not used as median size: {why}; DOUBT: write phi, mm or µm into the heading")
        return np.full(n, np.nan)
    notes.append(
        f"{place.text()}: {'mean size, taken for the median,' if mean else 'median size'} in {NAMES[unit]}{told}"
    )
    low, high = BOUNDS[unit]
    outside = np.isfinite(value) & ~((value >= low) & (value <= high))
    hit = [int(i) for i in np.flatnonzero(outside)]
    audit.add(place, rows[hit], [cells[i] for i in hit], [""] * len(hit), f"no grain size in {NAMES[unit]}: not used")
    value = np.where(outside, np.nan, value)
    phi = value if unit == "phi" else -np.log2(value / (1.0 if unit == "mm" else 1000.0))
    phi = np.asarray(phi, dtype=np.float64)
    return phi if match is None else np.where(match >= 0, phi[match], np.nan)


def unit_of_sizes(value: FloatArray, mud: FloatArray) -> tuple[str | None, str]:
    """Tell the unit of grain sizes from their values, or from the mud fractions beside them.

    Returns
    -------
    unit : {"phi", "mm", "um"} or None
    told : str
        By what.

    Examples
    --------
    >>> import numpy as np
    >>> none = np.full(3, np.nan)
    >>> [unit_of_sizes(np.array(v), none)[0] for v in ([180.0, 90.0, 15.0], [-0.5, 2.0, 3.0], [0.2, 1.0, 2.0])]
    ['um', 'phi', None]
    """
    known = value[np.isfinite(value)]
    if not len(known):
        return None, ""
    if (known < 0.0).any():
        return "phi", ", told by values below 0"
    if known.max() > BOUNDS["phi"][1] and np.median(known) > 4.0:
        return "um", f", told by its largest, {known.max():g}"
    both = np.isfinite(value) & np.isfinite(mud) & (value > 0.0) & (np.abs(mud - 0.5) > 0.1)
    muddy = mud[both] > 0.5
    if both.sum() < FEWEST or muddy.all() or not muddy.any():
        return None, ""
    finer = {"phi": value[both] > 4.0, "mm": value[both] < MUD_MM, "um": value[both] < 1000.0 * MUD_MM}
    right = {unit: float((fine == muddy).mean()) for unit, fine in finer.items()}
    best = max(right, key=lambda unit: right[unit])
    if right[best] < AGREEING or sum(share >= AGREEING for share in right.values()) > 1:
        return None, ""
    return best, ", told by the mud of the same rows"
