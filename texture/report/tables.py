"""All tables of the page, each made by the module of its subject."""

from __future__ import annotations

from typing import TYPE_CHECKING

from texture.report.bed_tables import (
    classes_table,
    inventory_table,
    mobility_table,
    readiness_table,
    stock_table,
)
from texture.report.defaults import defaults_table
from texture.report.error_tables import limits_table, methods_table, structure_table, treatments_table
from texture.report.quantities import quantity_table
from texture.report.row_tables import audit_table, credits_table, outliers_table, rows_table, set_aside_table
from texture.report.table import Table
from texture.report.trust_tables import agreement_table, quantiles_table, standings_table

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["page_tables"]


def page_tables(result: Result) -> dict[str, Table]:
    """Make all tables of the page."""
    return {
        "methods": methods_table(result),
        "standings": standings_table(result),
        "quantile_cover": quantiles_table(result),
        "agreement": agreement_table(result),
        "treatments": treatments_table(result),
        "limits": limits_table(result),
        "structure": structure_table(result),
        "classes": classes_table(result),
        "inventory": inventory_table(result),
        "stock": stock_table(result),
        "quantities": quantity_table(result),
        "readiness": readiness_table(result),
        "mobility": mobility_table(result),
        "rows": rows_table(result),
        "set_aside": set_aside_table(result),
        "audit": audit_table(result),
        "outliers": outliers_table(result),
        "credits": credits_table(result),
        "defaults": defaults_table(result),
        "inputs": _inputs(result),
    }


def _inputs(result: Result) -> Table:
    from texture.output.provenance import file_record
    from texture.recipe.paths import named_files

    rows = [
        [path.name, str(file_record(path, path.parent)["sha256"])[:16]] for path in named_files(result.found.recipe)
    ]
    return Table(
        "Input files and the first 16 digits of their SHA-256; provenance.json has them in full.",
        ["file", "SHA-256"],
        rows,
    )
