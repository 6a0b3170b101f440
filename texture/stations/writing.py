"""Write stations.csv, stations.gpkg and audit.csv so that they are safe to open in a spreadsheet program."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from texture.errors import OutputError
from texture.stations.account import Stations

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["safe_cell", "safe_table", "write_tables"]

_STARTS_A_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\n", "|", "%")


def safe_cell(value: object) -> object:
    """Put an apostrophe before a text that a spreadsheet program would take for a formula.

    Numbers, negative ones included, stay as they are.

    >>> safe_cell("=1+1"), safe_cell("-"), safe_cell("-3.25"), safe_cell("mud"), safe_cell(-1.5)
    ("'=1+1", "'-", '-3.25', 'mud', -1.5)
    """
    if not isinstance(value, str) or not value.lstrip(" ").startswith(_STARTS_A_FORMULA):
        return value
    if value[0] in "+-" and "_" not in value:
        try:
            float(value)
        except ValueError:
            return "'" + value
        return value
    return "'" + value


def write_tables(stations: Stations, folder: str | Path) -> list[Path]:
    """Write `stations.csv`, `stations.gpkg`, `audit.csv`, `rows.csv` and, if there are cores, `deeper.csv` to a folder that exists.

    `audit.csv` has every reading that was not plain, `rows.csv` the fate of every row with the reason.

    Numbers are written so that reading them back gives the same float64. Unknown parts are blank. Texts that start a
    formula are led by an apostrophe in all of them.

    Returns
    -------
    paths : list of Path

    Raises
    ------
    OutputError
        If a file cannot be written.
    """
    import pyogrio

    folder = Path(folder)
    paths = [folder / "stations.csv", folder / "stations.gpkg", folder / "audit.csv", folder / "rows.csv"]
    table = safe_table(stations.table)
    try:
        table.drop(columns="geometry").to_csv(paths[0], index=False, encoding="utf-8", lineterminator="\n")
        paths[1].unlink(missing_ok=True)
        # A GeoPackage holds its own date; a fixed one keeps the bytes the same for the same stations.
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": "2000-01-01T00:00:00.000Z"})
        try:
            pyogrio.write_dataframe(table, paths[1], layer="stations", driver="GPKG")
        finally:
            pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})
        safe_table(stations.audit).to_csv(paths[2], index=False, encoding="utf-8", lineterminator="\n")
        rows = stations.ledger.drop(columns="station")
        safe_table(rows).to_csv(paths[3], index=False, encoding="utf-8", lineterminator="\n")
        if len(stations.deeper):
            paths.append(folder / "deeper.csv")
            safe_table(stations.deeper).to_csv(paths[4], index=False, encoding="utf-8", lineterminator="\n")
    except (OSError, RuntimeError) as error:
        raise OutputError(f"{folder}: the station tables cannot be written ({error})") from error
    return paths


def safe_table(table: pd.DataFrame) -> pd.DataFrame:
    """Return the table with every text made safe by `safe_cell`."""
    from pandas.api.types import is_object_dtype, is_string_dtype

    texts = [c for c in table if c != "geometry" and (is_object_dtype(table[c]) or is_string_dtype(table[c]))]
    return table.assign(**{str(c): table[c].map(safe_cell) for c in texts})
