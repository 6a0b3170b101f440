"""Parquet tables, with or without points, as sheets; needs pyarrow, the optional extra `parquet`."""

from __future__ import annotations

from pathlib import Path

from texture.errors import SampleError
from texture.stations.extent import AREA_MOST
from texture.stations.files import Cell, Sheet
from texture.stations.points import plain_cell, sheet_of_points

__all__ = ["read_parquet"]


def read_parquet(path: Path) -> list[Sheet]:
    """Read a parquet file; the names of its columns are row 1.

    A file with a column of points, as its own metadata say, is read like a layer of points.

    Raises
    ------
    SampleError
        If pyarrow is missing, or the file is damaged or larger than any survey.
    """
    try:
        import pyarrow
        import pyarrow.parquet as pq
    except ImportError:
        raise SampleError(
            f"{path.name}: parquet tables need pyarrow, which is not installed; install seabed-texture[parquet], or save the "
            "table as csv"
        ) from None
    try:
        about = pq.read_metadata(path)
        cells = about.num_rows * about.num_columns
        if cells > AREA_MOST:
            raise SampleError(
                f"{path.name}: {cells:,} cells, expected at most {AREA_MOST:,}; keep the columns you need"
            )
        if b"geo" in (about.metadata or {}):
            import geopandas as gpd

            sheet = sheet_of_points(gpd.read_parquet(path), path)
            if sheet is None:
                raise SampleError(f"{path.name}: its shapes are no points, expected one for each sample; export points")
            return [sheet]
        table = pq.read_table(path)
    except SampleError:
        raise
    except (pyarrow.ArrowException, OSError, ValueError) as error:
        reason = " ".join(str(error).split())[:120]
        raise SampleError(f"{path.name}: not a readable parquet table ({reason}); export it again or as csv") from error
    columns = [column.to_pylist() for column in table.columns]
    header: list[Cell] = [str(name) for name in table.column_names]
    rows = [[plain_cell(v) for v in row] for row in zip(*columns, strict=True)]
    return [Sheet(path.name, "", [header, *rows])]
