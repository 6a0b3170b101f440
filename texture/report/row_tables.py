"""Tables of the rows: what became of each, and what was read in it that was not plain."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING

from texture.report.table import Table, number

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["audit_table", "credits_table", "outliers_table", "rows_table", "set_aside_table"]

MOST_ROWS = 2_000  # of the set-aside list on the page; audit.csv holds them all


def rows_table(result: Result) -> Table:
    """Fate of the rows of every file and sheet."""
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


def set_aside_table(result: Result) -> Table:
    """Rows set aside, each with its reason."""
    table = result.found.stations.set_aside
    rows = [[str(v) for v in row] for row in table.head(MOST_ROWS).itertuples(index=False)]
    more = len(table) - len(rows)
    caption = "Rows set aside, with the reason" + (f"; {more:,} more stand in rows.csv" if more > 0 else "") + "."
    return Table(caption, ["file", "sheet", "row", "id", "reason"], rows, numeric=[2])


def outliers_table(result: Result) -> Table:
    """Stations that all others disagree with."""
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


def audit_table(result: Result) -> Table:
    """Counts of readings that were not plain, by rule."""
    audit = result.found.stations.audit
    counts = Counter(zip(audit["file"], audit["rule"], strict=True))
    rows = [[str(file), str(rule), f"{count:,}"] for (file, rule), count in sorted(counts.items())]
    return Table("Readings that were not plain, and changes, by rule; each one stands in audit.csv.",
                 ["file", "rule", "cells"], rows, numeric=[2])  # fmt: skip


def credits_table(result: Result) -> Table:
    """Who is to be thanked for the data of each survey."""
    stations, rows = result.found.stations, []
    for block in result.found.recipe.samples:
        mine = stations.samples[stations.samples["file"] == block.file.name]
        if block.sheet is not None:
            mine = mine[mine["sheet"] == block.sheet]
        surveys = ", ".join(dict.fromkeys(str(name) for name in mine["survey"])) or block.survey or block.file.stem
        rows.append([surveys, block.file.name, f"{len(mine):,}", block.credit or "no credit given in the recipe"])
    return Table(
        "Where the data come from; the words are those of `credit` in each [[samples]] block of the recipe.",
        ["survey", "file", "stations", "credit"],
        rows,
        numeric=[2],
    )
