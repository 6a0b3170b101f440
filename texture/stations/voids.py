"""Places that were dredged, filled or covered: samples older than that say nothing of the present bed there."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.errors import SampleError
from texture.recipe import Intake, Void
from texture.stations.ages import first_day

__all__ = ["set_void"]


@dataclass(frozen=True)
class _Place:
    shape: Any  # shapely polygon in degrees of WGS 84
    date: dt.date
    reason: str


def set_void(rows: pd.DataFrame, intake: Intake) -> tuple[str, ...]:
    """Set aside, in place, the rows that were taken in a void's polygon before its date.

    Returns
    -------
    notes : tuple of str
        Rows inside without a date, which stay.

    Raises
    ------
    SampleError
        If a file of polygons cannot be read, or does not tell their dates.
    """
    notes = []
    for void in intake.void:
        places = _places(void)
        dates = sorted({p.date.isoformat() for p in places})
        when = dates[0] if len(dates) == 1 else f"{dates[0]} to {dates[-1]}"
        days = [first_day(str(text)) for text in rows["date"]]
        undated = np.array([day is None for day in days], dtype=bool)
        unknown, any_inside = np.zeros(len(rows), dtype=bool), False
        for place in places:
            inside = _inside(place.shape, rows) & rows["fate"].isin(["used", "evidence"]).to_numpy()
            old = inside & np.array([day is not None and day < place.date for day in days], dtype=bool)
            rows.loc[old, "reason"] = f"older than the {place.reason} of {place.date.isoformat()} at its place"
            rows.loc[old, "fate"], rows.loc[old, "deep"] = "set_aside", False
            unknown |= inside & undated
            any_inside |= bool(inside.any())
        if unknown.any():
            notes.append(
                f"{int(unknown.sum())} samples without a date lie where there was {void.reason} on {when}; DOUBT: they are kept"
            )
        if not any_inside:
            what = "its polygon" if void.file is None else f"the polygons of {void.file.name}"
            notes.append(f"no sample lies where there was {void.reason} on {when}; check {what}")
    return tuple(notes)


def _places(void: Void) -> list[_Place]:
    import shapely

    if void.file is None:
        assert void.polygon is not None  # the recipe has seen to it
        assert void.date is not None
        return [_Place(shapely.make_valid(shapely.Polygon(void.polygon)), void.date, void.reason)]
    frame = _polygons(void)
    dates = [void.date] * len(frame) if void.date is not None else _dates(frame, void)
    shapes = shapely.make_valid(frame.geometry.to_numpy())
    return [_Place(shape, date, void.reason) for shape, date in zip(shapes, dates, strict=True) if date is not None]


def _polygons(void: Void) -> Any:
    import geopandas as gpd
    import pyogrio

    assert void.file is not None  # the recipe has seen to it
    name = void.file.name
    try:
        frame = gpd.read_file(void.file, engine="pyogrio")
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, RuntimeError) as error:
        raise SampleError(
            f"{name}: not a readable layer of polygons ({' '.join(str(error).split())[:120]}); export it again as GeoJSON"
        ) from error
    kinds = set(frame.geom_type.dropna()) if isinstance(frame, gpd.GeoDataFrame) else set()
    frame = frame[frame.geometry.notna()] if kinds else frame
    if not len(frame) or not kinds <= {"Polygon", "MultiPolygon"}:
        found = ", ".join(sorted(kinds)) or "nothing with a shape"
        raise SampleError(
            f"{name}: found {found}, expected polygons of what was changed; export areas, not lines or points"
        )
    if frame.crs is None:
        raise SampleError(
            f"{name}: no coordinate system, expected one; export it with its projection, or as GeoJSON in degrees"
        )
    return frame.to_crs(4326)


def _dates(frame: Any, void: Void) -> list[dt.date]:
    assert void.file is not None  # only files have attributes
    columns = {str(c).casefold(): c for c in frame.columns if c != frame.geometry.name}
    column = columns.get(void.date_attribute.casefold())
    if column is None:
        raise SampleError(
            f'{void.file.name}: no attribute "{void.date_attribute}" with the day of each polygon; attributes there: '
            f"{', '.join(map(str, columns.values())) or 'none'}; give date or date_attribute in the recipe's void block"
        )
    dates = []
    for i, value in enumerate(frame[column]):
        text = value.isoformat()[:10] if hasattr(value, "isoformat") and value == value else str(value)
        day = first_day(text)
        if day is None:
            raise SampleError(
                f'{void.file.name}, polygon {i + 1}: "{column}" is "{text}", expected a day such as 2011-06-30; correct it, or give date in '
                "the recipe's void block"
            )
        dates.append(day)
    return dates


def _inside(polygon: Any, rows: pd.DataFrame) -> npt.NDArray[np.bool_]:
    import shapely

    lon, lat = (rows[name].to_numpy(dtype=np.float64) for name in ("longitude", "latitude"))
    located = np.isfinite(lon) & np.isfinite(lat)
    inside = np.zeros(len(rows), dtype=bool)
    inside[located] = shapely.intersects_xy(polygon, lon[located], lat[located])
    return inside
