"""Tables of the bed: classes, mass, and what would move."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.report.table import Table, number

if TYPE_CHECKING:
    from texture.bed import Stock
    from texture.result import Result

__all__ = ["classes_table", "inventory_table", "mobility_table", "readiness_table", "stock_table"]

Floats = NDArray[np.float64]


def classes_table(result: Result) -> Table:
    """Sediment classes and their properties, each with where it is from."""
    from texture.bed import HIDING_WORDS, PACKING_WORDS

    c, settings = result.bed.classes, result.found.recipe.bed
    parts = result.found.recipe.composition.parts

    def sourced(value: float, unit_value: str, source: str) -> str:
        return f"{unit_value} ({source})" if np.isfinite(value) else "not given"

    rows = [
        [
            c.names[i],
            f"{c.share[i]:g} of {parts[int(c.part[i])]}",
            f"{c.diameter_m[i] * 1e6:,.0f}",
            sourced(c.settling_velocity_m_s[i], f"{c.settling_velocity_m_s[i] * 1000:.3g}", c.settling_source[i]),
            sourced(c.critical_stress_pa[i], f"{c.critical_stress_pa[i]:.3g}", c.stress_source[i]),
            f"{c.erosion_rate[i]:.3g}" if np.isfinite(c.erosion_rate[i]) else "not given",
        ]
        for i in range(len(c.names))
    ]
    return Table(
        "Sediment classes. Computed: Soulsby (1997) settling and Soulsby & Whitehouse (1997) threshold, for single "
        f"grains above 63 µm only. In the mixture: {HIDING_WORDS[settings.hiding]}. Dry density of the bed: "
        f"{PACKING_WORDS[settings.packing]}.",
        ["class", "share", "diameter, µm", "settling, mm/s", "critical stress, Pa", "erosion rate"],
        rows,
        numeric=[2],
    )


def inventory_table(result: Result) -> Table:
    """Dry mass of each class, and what rim and least fraction did to it."""
    account = result.bed.account
    rows = [
        [
            name,
            number(tonnes / 1e6, 3),
            number(account.rim_tonnes[name] / 1e6, 3),
            number(-account.least_fraction_tonnes[name] / 1e6, 3),
        ]
        for name, tonnes in account.tonnes.items()
    ]
    return Table(
        "Dry mass in water cells, all layers, in million tonnes; what the rim put in (+) or took out (−); what fell "
        "below the least fraction.",
        ["class", "mass", "by the rim", "below least fraction"],
        rows,
        numeric=[1, 2, 3],
    )


def stock_table(result: Result) -> Table:
    """Dry mass by depth band and class."""
    from texture.bed.inventory import HOW

    def band(stock: Stock) -> str:
        low, high = stock.depth_from_m, stock.depth_to_m
        if np.isnan(low) and np.isnan(high):
            return "all depths" if stock.zone == "all" else stock.zone
        if np.isnan(low):
            return f"up to {high:g} m"
        return f"{low:g} to {high:g} m" if np.isfinite(high) else f"below {low:g} m"

    rows = [
        [
            band(stock),
            stock.sediment,
            number(stock.area_km2, 1),
            *(number(tonnes / 1e6, 3) for tonnes in (stock.tonnes, stock.tonnes_low, stock.tonnes_high)),
        ]
        for stock in result.inventory
    ]
    return Table(
        f"Dry mass by water depth, all layers, in million tonnes. {HOW}",
        ["depth", "class", "area, km²", "mass", "low", "high"],
        rows,
        numeric=[2, 3, 4, 5],
    )


def mobility_table(result: Result) -> Table:
    """What each wave and current condition would move."""
    names = result.bed.classes.names

    def percent(value: float) -> str:
        return number(100.0 * value, 1)

    rows = [
        [
            m.name,
            number(m.median_pa, 2),
            number(m.largest_pa, 2),
            *(
                percent(m.moving_share[name])
                + (f" ({number(m.moving_hours[name], 0)} h)" if np.isfinite(m.moving_hours[name]) else "")
                for name in names
            ),
            percent(m.flushed_share),
            percent(m.rim_share),
        ]
        for m in result.moved
    ]
    return Table(
        "What named waves and currents would move. Stress: the largest in a wave period on the grains of the surface (Soulsby "
        "1997), in Pa. Classes: percent of the water area where the class lies at the surface and the stress exceeds its "
        "critical stress (of a series, the mean over its times), and hours above it where it lies. Flushed: percent under a fair-weather stress far beyond the strength of the mud that lies there; a "
        "model would carry it off at once. Rim: percent of the rim's edge that moves.",
        ["condition", "median stress", "largest", *names, "mud flushed", "rim"],
        rows,
        numeric=list(range(1, len(names) + 5)),
    )


def readiness_table(result: Result) -> Table:
    """Verdicts of the readiness checks on the finished bed."""
    from texture.bed import BedArrays, check_bed

    bed, target = result.bed, result.found.target
    cells = target.shape

    def laid(values: Floats) -> Floats:
        return values.reshape(*values.shape[:-1], *cells)

    arrays = BedArrays(
        names=bed.classes.names,
        class_fraction=laid(bed.class_fraction),
        water=target.active.reshape(cells),
        erodible_thickness=laid(bed.erodible_thickness),
        dry_density=laid(bed.dry_density),
        porosity=laid(bed.porosity),
        class_mass_content=laid(bed.class_mass_content),
        evidence=bed.evidence.reshape(*bed.evidence.shape[:-1], *cells),
        rim_weight=laid(bed.rim_weight),
        diameter_m=bed.classes.diameter_m,
        settling_velocity_m_s=bed.classes.settling_velocity_m_s,
        critical_stress_pa=bed.classes.critical_stress_pa,
        pairs=target.edges.astype(np.int64) if len(cells) == 1 else None,
    )
    return Table(
        "Is the bed ready for a model? “fail”: a model would stop or start with wrong mass; “warn”: it will run, look "
        "first. The same checks run on the file with: texture inspect bed.nc",
        ["check", "verdict", "what was found"],
        [[check.name, check.verdict, check.detail] for check in check_bed(arrays)],
    )
