"""How loosely grains of a size lie: porosity and dry density of a bed."""

from __future__ import annotations

from collections.abc import Callable
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.bed.grain import check_diameter
from texture.errors import BedError

__all__ = ["dry_density", "porosity"]


def porosity(median_diameter_m: ArrayLike, method: Literal["wu_wang", "komura"] = "wu_wang") -> NDArray[np.float64]:
    """Share of pores in a freshly laid bed, from its median grain size.

    Parameters
    ----------
    median_diameter_m : array-like
        Metres; NaN gives NaN. Grains finer than 1 µm are refused: no bed was measured there.
    method : {"wu_wang", "komura"}
        Wu & Wang (2006): 0.13 + 0.21 / (d + 0.002)^0.21; Komura (1963): 0.245 + 0.0864 / (0.1 d)^0.21; d in mm.

    Returns
    -------
    float array
        Between 0 and 1, falling with grain size. Buried mud that has consolidated is denser.

    Raises
    ------
    BedError
        For an unknown method or a diameter out of range.

    References
    ----------
    Wu, W., Wang, S. S. Y. (2006). Formulas for sediment porosity and settling velocity. Journal of Hydraulic
    Engineering 132, 858-862.
    Komura, S. (1963). Discussion of "Sediment transportation mechanics: introduction and properties of
    sediment". Journal of the Hydraulics Division ASCE 89, 263-266.

    Examples
    --------
    >>> porosity([4e-6, 250e-6, 1e-3]).round(3)
    array([0.745, 0.41 , 0.34 ])
    """
    if method not in METHODS:
        raise BedError(f'porosity: unknown method "{method}"; known: {", ".join(METHODS)}')
    diameter = check_diameter(median_diameter_m)
    if (diameter < 1e-6).any():
        raise BedError(f"porosity: grain diameter {np.nanmin(diameter):g} m, expected at least 1e-06 m")
    return METHODS[method](diameter * 1e3)


def _wu_wang(diameter_mm: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(0.13 + 0.21 / (diameter_mm + 0.002) ** 0.21)


def _komura(diameter_mm: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(0.245 + 0.0864 / (0.1 * diameter_mm) ** 0.21)


METHODS: dict[str, Callable[[NDArray[np.float64]], NDArray[np.float64]]] = {"wu_wang": _wu_wang, "komura": _komura}


def dry_density(porosity: ArrayLike, grain_density: ArrayLike) -> NDArray[np.float64]:
    """Mass of dry sediment in a volume of bed, (1 − porosity) · grain density, kg m-3.

    >>> float(dry_density(0.4, 2650.0))
    1590.0
    """
    share = np.asarray(porosity, dtype=np.float64)
    if ((share < 0.0) | (share >= 1.0)).any():
        raise BedError("porosity outside 0 to 1")
    return np.asarray((1.0 - share) * np.asarray(grain_density, dtype=np.float64))
