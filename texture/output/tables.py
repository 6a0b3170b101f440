"""Plain tables: CSV with points as decimal marks, and stations as a GeoPackage."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["write_csv", "write_stations"]


def write_csv(path: Path, frame: pd.DataFrame) -> None:
    """Write a table as UTF-8 CSV: comma, decimal point, one line feed a row, blank where unknown.

    Numbers have the fewest digits that give the same number back.
    """
    frame.to_csv(path, index=False, lineterminator="\n", encoding="utf-8")


def write_stations(folder: Path, table: Any, audit: pd.DataFrame) -> None:
    """Write `stations.csv`, `stations.gpkg` and `audit.csv`.

    Parameters
    ----------
    folder : path
    table : GeoDataFrame
        Stations in longitude and latitude.
    audit : DataFrame
        Every change made to a row.
    """
    import pyogrio

    write_csv(folder / "stations.csv", table.drop(columns=table.geometry.name))
    write_csv(folder / "audit.csv", audit)
    # A GeoPackage stores its date; a fixed one keeps the bytes the same for the same stations.
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": "2000-01-01T00:00:00.000Z"})
    try:
        table.to_file(folder / "stations.gpkg", layer="stations", driver="GPKG", engine="pyogrio")
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})
