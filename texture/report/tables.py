"""The page's tables: rows of text from a result, nothing drawn."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from texture.bed import Stock
    from texture.result import Result

__all__ = ["Table", "page_tables"]

MOST_ROWS = 500  # of the set-aside list on the page; audit.csv holds them all


@dataclass(frozen=True)
class Table:
    """A table of text: `numeric` lists columns set flush right, `chosen` the row that is the map's own."""

    caption: str
    head: list[str]
    rows: list[list[str]]
    numeric: list[int] = field(default_factory=list)
    chosen: int = -1


def page_tables(result: Result) -> dict[str, Table]:
    """Make all tables of the page."""
    return {
        "methods": _methods(result),
        "treatments": _treatments(result),
        "limits": _limits(result),
        "structure": _structure(result),
        "classes": _classes(result),
        "inventory": _inventory(result),
        "stock": _stock(result),
        "mobility": _mobility(result),
        "rows": _rows(result),
        "set_aside": _set_aside(result),
        "audit": _audit(result),
        "outliers": _outliers(result),
        "inputs": _inputs(result),
    }


def number(value: float, digits: int = 3) -> str:
    """Write a number for a person; a dash where there is none, and no sign on a zero.

    >>> number(-0.0001), number(-1234.5, 1), number(float("nan"))
    ('0.000', '−1,234.5', '–')
    """
    if not np.isfinite(value):
        return "–"
    text = f"{abs(value):,.{digits}f}"
    return f"−{text}" if value < 0.0 and any(c in text for c in "123456789") else text


def _methods(result: Result) -> Table:
    found = result.found
    parts = found.recipe.composition.parts
    names = [("rmse", "RMSE"), ("mean_error", "mean error"), ("r_squared", "R²"), ("coverage_90", "90 % cover")]
    rows = []
    for method in found.validation.methods:
        for part in parts:
            scores = [number(method.score(part, key), 3 if key in ("rmse", "mean_error") else 2) for key, _ in names]
            rows.append([method.method.replace("_", " "), part, f"{method.score(part, 'n'):.0f}", *scores])
    return Table(
        "Held-out scores. RMSE and mean error are fractions of dry mass; mean error is prediction minus measurement. "
        "90 % cover: share of held-out samples inside their 90 % interval.",
        ["method", "part", "stations", *[label for _, label in names]],
        rows,
        numeric=[2, 3, 4, 5, 6],
    )


def _treatments(result: Result) -> Table:
    found = result.found
    parts, tried = found.recipe.composition.parts, found.validation.tried
    rows = []
    for t in tried:
        scores = [number(t.held_out.score(p, s)) for p in parts for s in ("rmse", "mean_error")]
        above = f"{number(t.above_best)} ± {number(t.standard_error)}"
        rows.append([t.treatment.label, number(t.error), above, *scores, "" if t.balanced else "out of balance"])
    return Table(
        "Treatments of zeros, each by the map's method on the same folds. Error: sum over parts of squared error relative to the part's "
        "variance; beside it how far above the best of those in balance, with the standard error of that. Out of balance: the mean error of a part is "
        "beyond a tenth of its mean, which may hold what lies unseen below the detection limit. The lowest error in balance is taken, or the "
        "first where it is within one standard error.",
        ["treatment", "error", "above the best", *[f"{p} {s}" for p in parts for s in ("RMSE", "mean error")], ""],
        rows,
        numeric=list(range(1, 3 + 2 * len(parts))),
        chosen=next(i for i, t in enumerate(tried) if t.chosen),
    )


def _limits(result: Result) -> Table:
    effect, parts = result.found.validation.limit_effect, result.found.recipe.composition.parts
    rows = []
    if effect is not None:
        for i, part in enumerate(parts):
            moved = [number(m[i] - effect.mean[i], 4) for m in (effect.halved, effect.doubled)]
            rows.append([part, number(effect.mean[i], 4), *moved])
    limit = "" if effect is None else f" ({effect.limit:g}), over {effect.cells:,} cells"
    return Table(
        f"How far the map's mean moves when the limit that zeros are treated at is halved and doubled{limit}.",
        ["part", "mean", "limit halved", "limit doubled"],
        rows,
        numeric=[1, 2, 3],
    )


def _structure(result: Result) -> Table:
    mapper = result.found.mapper
    rows = []
    for name, c in zip(mapper.column_names, mapper.structure, strict=True):
        model = " + ".join(s.model + (f" {s.smoothness:g}" if s.smoothness else "") for s in c.structures) or "none"
        sill = sum(s.sill for s in c.structures)
        rows.append(
            [name, model, number(c.range_m / 1000, 1) if c.structures else "–"]
            + [number(v, 2) for v in (sill, c.small_scale, c.survey)]
        )
    return Table(
        "Fitted structure of each log-ratio coordinate. Range: where the correlation has fallen to 0.05. Small-scale: "
        "the bed's own patchiness below the sampling distance. Survey: variance of the offset that samples of one survey share.",
        ["coordinate", "model", "range, km", "sill", "small-scale", "survey"],
        rows,
        numeric=[2, 3, 4, 5],
    )


def _classes(result: Result) -> Table:
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


def _inventory(result: Result) -> Table:
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


def _stock(result: Result) -> Table:
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


def _mobility(result: Result) -> Table:
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


def _rows(result: Result) -> Table:
    accounts = result.found.stations.accounts
    fates = [c for c in accounts.columns if c not in ("file", "sheet")]
    rows = [[str(r["file"]), str(r["sheet"]), *[f"{int(r[f]):,}" for f in fates]] for _, r in accounts.iterrows()]
    rows.append(["all", "", *[f"{int(accounts[f].sum()):,}" for f in fates]])
    head = ["file", "sheet", *[f.replace("_", " ") for f in fates]]
    return Table(
        "Every filled row of every sheet has one fate; the columns after “rows read” add up to it.",
        head,
        rows,
        numeric=list(range(2, len(head))),
    )


def _set_aside(result: Result) -> Table:
    table = result.found.stations.set_aside
    rows = [[str(v) for v in row] for row in table.head(MOST_ROWS).itertuples(index=False)]
    more = len(table) - len(rows)
    caption = "Rows set aside, with the reason" + (f"; {more:,} more stand in audit.csv" if more > 0 else "") + "."
    return Table(caption, ["file", "sheet", "row", "id", "reason"], rows, numeric=[2])


def _outliers(result: Result) -> Table:
    rows = [
        [str(v) for v in row[:-1]] + [number(row[-1], 1)]
        for row in result.found.stations.outliers.itertuples(index=False)
    ]
    return Table(
        "Stations more than four standard deviations from what all others say; they are in the map. Look at their rows.",
        ["id", "survey", "file", "sheet", "row", "error in standard deviations"],
        rows,
        numeric=[4, 5],
    )


def _audit(result: Result) -> Table:
    audit = result.found.stations.audit
    counts = Counter(zip(audit["file"], audit["rule"], strict=True))
    rows = [[str(file), str(rule), f"{count:,}"] for (file, rule), count in sorted(counts.items())]
    return Table("Readings that were not plain, and changes, by rule; each one stands in audit.csv.",
                 ["file", "rule", "cells"], rows, numeric=[2])  # fmt: skip


def _inputs(result: Result) -> Table:
    from texture.output.provenance import file_record

    recipe = result.found.recipe
    paths = [s.file for s in recipe.samples] + [
        p for p in (recipe.target.file, recipe.target.land, recipe.outputs.names) if p
    ]
    rows = [[p.name, str(file_record(p, p.parent)["sha256"])[:16]] for p in dict.fromkeys(paths)]
    return Table(
        "Input files and the first 16 digits of their SHA-256; provenance.json has them in full.",
        ["file", "SHA-256"],
        rows,
    )
