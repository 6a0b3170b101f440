"""Units by name: what a names file may ask for instead of ours, there and back."""

from __future__ import annotations

import difflib
from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from texture.errors import RecipeError

__all__ = ["Conversion", "find_conversion", "scaling"]

Change = Callable[[NDArray[np.floating]], NDArray[np.floating]]


class Conversion(NamedTuple):
    """From our unit to theirs and back."""

    there: Change
    back: Change


def scaling(factor: float) -> Conversion:
    """Multiply there, divide back; 1 leaves the numbers as they are."""
    if factor == 1.0:
        return Conversion(lambda v: v, lambda v: v)
    return Conversion(lambda v: v * v.dtype.type(factor), lambda v: v / v.dtype.type(factor))


PHI = Conversion(lambda v: -np.log2(v * v.dtype.type(1e3)), lambda v: np.exp2(-v) / v.dtype.type(1e3))
"""phi = −log2 of the diameter in mm (Krumbein 1934)."""

FACTORS: dict[str, dict[str, float]] = {
    "1": {"1": 1.0, "percent": 100.0, "%": 100.0, "per mille": 1e3},
    "m": {"m": 1.0, "metre": 1.0, "meter": 1.0, "cm": 1e2, "mm": 1e3, "um": 1e6, "micrometre": 1e6, "micrometer": 1e6},
    "kg m-2": {"kg m-2": 1.0, "kg/m2": 1.0, "g m-2": 1e3, "g cm-2": 0.1, "t m-2": 1e-3},
    "kg m-3": {"kg m-3": 1.0, "kg/m3": 1.0, "g l-1": 1.0, "g/l": 1.0, "g cm-3": 1e-3, "g/cm3": 1e-3, "t m-3": 1e-3},
    "m s-1": {"m s-1": 1.0, "m/s": 1.0, "cm s-1": 1e2, "cm/s": 1e2, "mm s-1": 1e3, "mm/s": 1e3},
    "Pa": {"Pa": 1.0, "N m-2": 1.0, "N/m2": 1.0, "kg m-1 s-2": 1.0, "dyn cm-2": 10.0},
    "kg m-2 s-1": {"kg m-2 s-1": 1.0, "kg/m2/s": 1.0, "g m-2 s-1": 1e3, "g cm-2 s-1": 0.1, "kg m-2 h-1": 3600.0},
    "kg m-2 s-1 Pa-1": {"kg m-2 s-1 Pa-1": 1.0, "kg/m2/s/Pa": 1.0, "s m-1": 1.0, "s/m": 1.0, "g m-2 s-1 Pa-1": 1e3},
}
"""Our unit → theirs → what our numbers are multiplied by."""


def find_conversion(ours: str, theirs: str, is_diameter: bool = False) -> Conversion:
    """Find how to get from one unit to another.

    Parameters
    ----------
    ours, theirs : str
    is_diameter : bool
        Grain diameters may be asked for in `phi` too.

    Raises
    ------
    RecipeError
        For a unit that is not known for this quantity.

    Examples
    --------
    >>> find_conversion("m", "phi", is_diameter=True).there(np.array([0.25e-3, 2e-3]))
    array([ 2., -1.])
    >>> find_conversion("1", "percent").there(np.array([0.25]))
    array([25.])
    """
    if theirs == "phi" and is_diameter:
        return PHI
    factors = FACTORS.get(ours, {ours: 1.0})
    if theirs in factors:
        return scaling(factors[theirs])
    known = [*factors, "phi"] if is_diameter else list(factors)
    close = difflib.get_close_matches(theirs, known, n=1, cutoff=0.6)
    hint = f'did you mean "{close[0]}"?' if close else f"known: {', '.join(known)}"
    raise RecipeError(f'units: "{theirs}" is no unit that "{ours}" can be turned into; {hint}; or give scale beside it')
