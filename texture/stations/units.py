"""The unit of the columns of parts: fractions of 1, percent, per mille or weights."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

from texture.stations.cells import Numbers
from texture.stations.columns import Column
from texture.stations.where import Where

__all__ = ["DIVISORS", "UNITS", "find_unit"]

FloatArray = npt.NDArray[np.float64]

DIVISORS = {"fraction": 1.0, "percent": 100.0, "permille": 1000.0, "weight": 1.0}
UNITS = {"fraction": "fractions of 1", "percent": "percent", "permille": "per mille", "weight": "weights"}


def find_unit(
    numbers: Mapping[str, Numbers], columns: Mapping[str, Column], setting: str, where: Where
) -> tuple[str, str | None]:
    """Tell the unit of the part columns.

    The sums of complete rows speak first: spreadsheets show 0.125 as 12.5 %, and the heading says what is
    shown. Then the headings, the percent signs in cells, and last the largest value.

    Returns
    -------
    unit : {"fraction", "percent", "permille", "weight"}
    note : str or None
        Said aloud when headings and sums contradict each other.

    Raises
    ------
    SampleError
        If nothing tells the unit.
    """
    stated = {c.unit for role, c in columns.items() if role in numbers}
    by_heading = next((u for u in ("percent", "permille", "fraction") if u in stated), None)
    if setting != "auto":
        return setting, None
    if "g" in stated and by_heading is None:
        return "weight", None
    if by_heading is None and any(n.percent_signs for n in numbers.values()):
        by_heading = "percent"
    by_sums = _unit_from_sums({role: n.value for role, n in numbers.items()})
    if by_sums is not None:
        if by_heading is not None and by_heading != by_sums:
            return (
                by_sums,
                f"{where.text()}: headings say {UNITS[by_heading]}, the sums of the rows say {UNITS[by_sums]}: taken as {UNITS[by_sums]}",
            )
        return by_sums, None
    if by_heading is not None:
        return by_heading, None
    largest = max((float(np.nanmax(n.value)) for n in numbers.values() if np.isfinite(n.value).any()), default=0.0)
    if largest <= 105.0:
        unit = "fraction" if largest <= 1.0 else "percent"
        told = f"no heading and no complete row tells the unit; the largest share, {largest:g}, reads as {UNITS[unit]}"
        return unit, f"{where.text()}: {told}; say unit in the recipe if it is not"
    raise where.error(
        f"a share of {largest:g} and rows that sum neither to 1 nor to 100",
        "fractions of 1 or percent",
        'say unit = "percent" or "fraction", or correct the columns',
    )


def _unit_from_sums(values: Mapping[str, FloatArray]) -> str | None:
    parts = [r for r in values if r not in ("silt", "clay")] if "mud" in values else list(values)
    if len(parts) < 2:
        return None
    table = np.column_stack([values[r] for r in parts])
    sums = table.sum(axis=1)[np.isfinite(table).all(axis=1)]
    if not len(sums):
        return None
    middle = float(np.median(sums))
    for unit, whole in (("fraction", 1.0), ("percent", 100.0), ("permille", 1000.0)):
        if 0.8 * whole <= middle <= 1.2 * whole:
            return unit
    return None
