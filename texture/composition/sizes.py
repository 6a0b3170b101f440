"""Grain sizes: metres, phi and named grades.

phi = -log2(diameter / 1 mm) (Krumbein 1934). Sizes are in metres inside the program; phi and mm are for its edges.
0.063 mm is 3.9885 phi, not 4: a laboratory's cut size is kept as it is given.
"""

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib import resources

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.errors import CompositionError

__all__ = [
    "CLAY_SILT_M",
    "MUD_SAND_M",
    "SAND_GRAVEL_M",
    "UNITS",
    "GradeScale",
    "find_grades",
    "grade",
    "grade_scale_names",
    "m_from_phi",
    "phi_from_m",
    "to_phi",
]

CLAY_SILT_M = 1e-3 / 256
"""Clay and silt meet at 8 phi, 1/256 mm (Wentworth 1922); 0.002 mm in ISO 14688-1."""
MUD_SAND_M = 1e-3 / 16
"""Mud and sand meet at 4 phi, 0.0625 mm (Wentworth 1922); 0.063 mm in ISO 14688-1."""
SAND_GRAVEL_M = 2e-3
"""Sand and gravel meet at -1 phi, 2 mm (Wentworth 1922, ISO 14688-1)."""

UNITS: Mapping[str, float] = {"m": 1.0, "mm": 1e-3, "um": 1e-6}
"""Metres in each unit of length that sizes are given in."""


def phi_from_m(diameter_m: npt.ArrayLike) -> Array:
    """Phi of diameters in metres; NaN stays NaN.

    Raises
    ------
    CompositionError
        For a diameter that is not above zero.

    Examples
    --------
    >>> phi_from_m([2e-3, 0.0625e-3]).round(6)
    array([-1.,  4.])
    """
    diameter = np.asarray(diameter_m, dtype=np.float64)
    if (diameter <= 0).any():
        raise CompositionError(f"grain size {diameter[diameter <= 0].flat[0]:g} m, expected more than zero")
    return np.asarray(-np.log2(diameter * 1e3))


def m_from_phi(phi: npt.ArrayLike) -> Array:
    """Diameters in metres; infinite phi gives 0 or infinity."""
    return np.asarray(1e-3 * np.exp2(-np.asarray(phi, dtype=np.float64)))


def to_phi(size: npt.ArrayLike, unit: str) -> Array:
    """Phi of sizes given in phi, m, mm or um."""
    if unit == "phi":
        return np.asarray(size, dtype=np.float64)
    if unit not in UNITS:
        raise CompositionError(f"unit = {unit!r}, expected phi, {', '.join(UNITS)}")
    return phi_from_m(np.asarray(size, dtype=np.float64) * UNITS[unit])


@dataclass(frozen=True)
class GradeScale:
    """Named size grades, finest first, and the limits between them in metres."""

    title: str
    source: str
    grades: tuple[str, ...]
    limits_m: tuple[float, ...]


def grade_scale_names() -> tuple[str, ...]:
    """Names of the grade scales that are shipped."""
    folder = resources.files("texture.composition") / "tables" / "grades"
    return tuple(sorted(f.name.removesuffix(".toml") for f in folder.iterdir() if f.name.endswith(".toml")))


@cache
def find_grades(name: str) -> GradeScale:
    """A shipped grade scale by name: wentworth, iso_14688_1."""
    if name not in grade_scale_names():
        raise CompositionError(f"grades = {name!r}, expected one of {', '.join(grade_scale_names())}")
    text = (resources.files("texture.composition") / "tables" / "grades" / f"{name}.toml").read_text(encoding="utf-8")
    table = tomllib.loads(text)
    limits = tuple(float(limit) * 1e-3 for limit in table["limits_mm"])
    return GradeScale(table["title"], table["source"], tuple(table["grades"]), limits)


def grade(diameter_m: npt.ArrayLike, scale: str | GradeScale = "wentworth") -> npt.NDArray[np.str_]:
    """Named grade of each grain size.

    A grain on a limit (to 1e-9 of the size) belongs to the coarser grade. NaN has no grade: an empty word.

    Examples
    --------
    >>> grade([0.2e-3, 2e-3])
    array(['fine sand', 'granule'], dtype='<U16')
    """
    chosen = scale if isinstance(scale, GradeScale) else find_grades(scale)
    diameter = np.asarray(diameter_m, dtype=np.float64)
    phi_from_m(diameter)  # refuses sizes of zero or less
    names = np.array([*chosen.grades, ""])
    place = np.searchsorted(chosen.limits_m, diameter * (1 + 1e-9), side="right")
    return names[np.where(np.isnan(diameter), len(chosen.grades), place)]
