"""A model's starting bed: what was decided of each cell, and what follows from it, worked out when asked for."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from texture.bed.cells import Floats
from texture.bed.classes import ClassProperties
from texture.bed.hiding import hiding_factor
from texture.bed.mixture import geometric_mean_diameter, mean_critical_stress, median_diameter
from texture.bed.mixture_packing import Packer
from texture.bed.roughness import skin_roughness_length

__all__ = ["CELLS_AT_ONCE", "EVIDENCE", "Account", "Bed", "in_blocks"]

Flags = NDArray[np.int8]

EVIDENCE = {
    0: "not in the map",
    1: "supported by samples",
    2: "extrapolated",
    3: "rim",
    4: "filled under land",
    5: "given by the user",
    6: "wider fall-back",
}
"""Where a cell's bed comes from."""

CELLS_AT_ONCE = 100_000
"""Keeps what is between the steps within some tens of megabytes, whatever the size of the grid."""


@dataclass(frozen=True)
class Account:
    """What the bed's making did to its mass, for the printed summary.

    Attributes
    ----------
    tonnes : dict
        Dry mass of each class in water cells, all layers.
    rim_tonnes : dict
        What the rim put in (positive) or took out (negative) of each class.
    least_fraction_tonnes : dict
        What `least_fraction` took out of each class.
    share_below_samples : float
        Share of the bed's mass in layers below the first, where no core reaches.
    rim_cells, land_cells : int
        Cells touched by the rim, and land cells that were filled.
    not_given : tuple of str
        Properties that the model will have to be told by hand.
    hard_cells : int
        Water cells of hard ground, where nothing can erode.
    """

    tonnes: dict[str, float]
    rim_tonnes: dict[str, float]
    least_fraction_tonnes: dict[str, float]
    share_below_samples: float
    rim_cells: int
    land_cells: int
    not_given: tuple[str, ...]
    hard_cells: int = 0


@dataclass(frozen=True, eq=False, repr=False)
class Bed:
    """A model's starting bed on n cells, land included; nothing is NaN.

    Only what was decided is kept; what follows from the fractions is worked out anew, in groups of cells, whenever it is asked
    for: on ten million cells all of it together would take gigabytes.

    Attributes
    ----------
    classes : ClassProperties
    class_fraction : float array, shape (k, layer, n)
        Of dry mass; sums to 1 along the first axis within 1e-12.
    erodible_thickness : float array, shape (layer, n)
        Metres.
    class_critical_stress : float array, shape (k, layer)
        Of each class alone in each layer, Pa; NaN where not known.
    evidence : int8 array, shape (layer, n)
        Keys of `EVIDENCE`. Lower layers filled "same" are extrapolated (2), those filled from cores supported (1) where one
        reaches and extrapolated elsewhere, compositions are given by the user (5); the rim (3) and land (4) go before both.
    rim_weight : float array, shape (n,)
        1 where the bed is the rim's own, 0 outside the rim.
    pack : Packer
        The rule that the recipe names as `bed.packing`.
    hidden : bool
        Whether a hiding correction is made.
    strong : bool
        Whether every class with mass in the bed has a critical stress.
    account : Account
    hard_ground_probability : float array, shape (n,), or None
        Above the recipe's threshold the thickness is the least there may be. None where nothing tells of hard ground.
    """

    classes: ClassProperties
    class_fraction: Floats
    erodible_thickness: Floats
    class_critical_stress: Floats
    evidence: Flags
    rim_weight: Floats
    pack: Packer
    hidden: bool
    strong: bool
    account: Account = field(hash=False)
    hard_ground_probability: Floats | None = None

    @property
    def class_mass_content(self) -> Floats:
        """Thickness × dry density × fraction, kg m-2, shape (k, layer, n)."""
        return np.asarray(self.class_fraction * (self.erodible_thickness * self.dry_density))

    @property
    def dry_density(self) -> Floats:
        """Kg m-3, shape (layer, n)."""
        return self._each(lambda f: self.pack(f, median_diameter(f, self.classes.diameter_m))[1])

    @property
    def porosity(self) -> Floats:
        """Share of pores in the volume, shape (layer, n)."""
        return self._each(lambda f: self.pack(f, median_diameter(f, self.classes.diameter_m))[0])

    @property
    def mixture_median_diameter(self) -> Floats:
        """Metres, shape (layer, n)."""
        return self._each(lambda f: median_diameter(f, self.classes.diameter_m))

    @property
    def mixture_geometric_mean_diameter(self) -> Floats:
        """Metres, shape (layer, n)."""
        return self._each(lambda f: geometric_mean_diameter(f, self.classes.diameter_m))

    @property
    def surface_median_diameter(self) -> Floats:
        """Of the first layer, metres, shape (n,)."""
        return np.asarray(self._each(lambda f: median_diameter(f, self.classes.diameter_m), first=True)[0])

    @property
    def skin_roughness_length(self) -> Floats:
        """z0 = d50 / 12 of the first layer, metres, shape (n,): grain roughness, not total drag."""
        return np.asarray(skin_roughness_length(self.surface_median_diameter))

    @property
    def hiding_exposure_factor(self) -> Floats | None:
        """What multiplies a class's critical stress in the mixture, shape (k, layer, n); None without a hiding correction."""
        if not self.hidden:
            return None
        factor = np.empty_like(self.class_fraction)
        for some in in_blocks(self.class_fraction.shape[2]):
            factor[:, :, some] = self._hiding(self.class_fraction[:, :, some])
        return factor

    @property
    def critical_stress_for_erosion(self) -> Floats | None:
        """Mass-weighted mean over the classes, Pa, shape (layer, n); None when a class with mass in the bed has none."""
        if not self.strong:
            return None
        known = np.nan_to_num(self.class_critical_stress)[:, :, None]  # unknown only in classes without mass

        def mixed(fraction: Floats) -> Floats:
            return mean_critical_stress(fraction, known * self._hiding(fraction) if self.hidden else known)

        return self._each(mixed)

    def tonnes_each(self, some: NDArray[np.int64], area_m2: Floats) -> Floats:
        """Dry mass of each class in some cells, all layers, shape (k, m); `area_m2` is theirs."""
        fraction = self.class_fraction[:, :, some]
        density = self.pack(fraction, median_diameter(fraction, self.classes.diameter_m))[1]
        volume = self.erodible_thickness[:, some] * area_m2
        return np.asarray(np.einsum("kln,ln->kn", fraction, density * volume) / 1000.0)

    def _hiding(self, fraction: Floats) -> Floats:
        return hiding_factor(fraction, self.classes.diameter_m, self.classes.loose)

    def _each(self, of: Callable[[Floats], Floats], first: bool = False) -> Floats:
        """Work something out that has one value for each layer and cell."""
        fraction = self.class_fraction[:, :1] if first else self.class_fraction
        result = np.empty(fraction.shape[1:])
        for some in in_blocks(fraction.shape[2]):
            result[:, some] = of(fraction[:, :, some])
        return result

    def __repr__(self) -> str:
        k, layers, n = self.class_fraction.shape
        total = sum(self.account.tonnes.values())
        return f"<Bed: {k} classes, {layers} layers, {n:,} cells, {total:,.0f} t in water>"


def in_blocks(count: int) -> Iterator[slice]:
    """Slices that bound the memory of what is between the steps.

    >>> [s.stop for s in in_blocks(250_000)]
    [100000, 200000, 250000]
    """
    for start in range(0, count, CELLS_AT_ONCE):
        yield slice(start, min(start + CELLS_AT_ONCE, count))
