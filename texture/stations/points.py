"""Point layers (GeoPackage, GeoJSON, Shapefile) as sheets: their attributes, and their points as two columns more."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from texture.errors import SampleError
from texture.stations.files import Cell, Sheet
from texture.stations.headings import roles_in

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["plain_cell", "read_points", "sheet_of_points"]


def read_points(path: Path) -> list[Sheet]:
    """Read every layer of points; the header is row 1, the first point row 2.

    Positions come from the points, as longitude and latitude of WGS 84, unless the attributes name them. Points without a
    coordinate system come as X and Y, for which the recipe must give one.

    Raises
    ------
    SampleError
        If the file cannot be read or holds no layer of points.
    """
    import pyogrio

    try:
        layers = [str(name) for name, _ in pyogrio.list_layers(path)]
        sheets = [sheet for name in layers if (sheet := _layer(path, name, len(layers) > 1)) is not None]
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, RuntimeError) as error:
        beside = "; a Shapefile needs its .shx and .dbf files beside it" if path.suffix.casefold() == ".shp" else ""
        raise SampleError(
            f"{path.name}: not a readable layer of points ({' '.join(str(error).split())[:120]}){beside}; export it again or as csv"
        ) from error
    if not sheets:
        raise SampleError(
            f"{path.name}: no layer of points, expected one point for each sample; export the table as csv"
        )
    return sheets


def _layer(path: Path, name: str, several: bool) -> Sheet | None:
    import geopandas as gpd

    return sheet_of_points(gpd.read_file(path, layer=name, engine="pyogrio"), path, name if several else "")


def sheet_of_points(frame: pd.DataFrame, path: Path, name: str = "") -> Sheet | None:
    """Turn points with attributes into a sheet; None if there are shapes other than points, or nothing at all."""
    import geopandas as gpd
    import pyproj

    if not isinstance(frame, gpd.GeoDataFrame) or not len(frame) or not (frame.geom_type.dropna() == "Point").all():
        return None
    notes: tuple[str, ...] = ()
    points = frame.geometry
    if frame.crs is not None:
        target = pyproj.CRS.from_epsg(4326)
        if frame.crs != target:
            how = pyproj.Transformer.from_crs(frame.crs, target, always_xy=True).description
            notes = (f"{path.name}: points from {frame.crs.name} to WGS 84 by {how}",)
        points = points.to_crs(target)
    table = frame.drop(columns=frame.geometry.name)
    header: list[Cell] = [str(c) for c in table.columns]
    rows = [[plain_cell(v) for v in row] for row in table.itertuples(index=False)]
    if not {"latitude", "longitude"} <= roles_in(header):
        header += ["Longitude", "Latitude"] if frame.crs is not None else ["X", "Y"]
        # a point without coordinates is a row without a position
        there = (~points.is_empty & points.notna()).to_numpy()
        for row, ok, point in zip(rows, there, points, strict=True):
            row += [point.x, point.y] if ok else [None, None]
    return Sheet(path.name, name, [header, *rows], notes=notes)


def plain_cell(value: object) -> Cell:
    """Return an attribute as a cell: no NaN, no NaT and no number types but Python's own."""
    if value is None or (isinstance(value, float) and np.isnan(value)):
        return None
    if hasattr(value, "to_pydatetime"):
        return value.to_pydatetime() if value == value else None  # NaT is not equal to itself
    return value.item() if isinstance(value, np.generic) else value
