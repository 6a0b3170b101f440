"""Old samples: they say less of the present bed, and nothing of a place that was dredged or filled since."""

from __future__ import annotations

import datetime as dt

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.recipe import Intake, Void
from texture.stations.audit import as_text

__all__ = ["decades_before_last", "first_day", "grow_noise", "set_void"]

FloatArray = npt.NDArray[np.float64]
DAYS_PER_DECADE = 3652.425
PARTS = ("mud", "sand", "gravel")


def first_day(text: str) -> dt.date | None:
    """First day of a date as the stations carry it: a day, a month, a year, or an interval; None if there is none.

    >>> first_day("1987-05-11"), first_day("1962"), first_day("2004-06-01/2004-07-31"), first_day("")
    (datetime.date(1987, 5, 11), datetime.date(1962, 1, 1), datetime.date(2004, 6, 1), None)
    """
    fields = text.partition("/")[0].split("-")
    try:
        return dt.date(int(fields[0]), *(int(f) for f in (*fields[1:3], "1", "1")[:2]))
    except ValueError:
        return None


def decades_before_last(dates: npt.NDArray[np.object_]) -> FloatArray:
    """Age of each sample before the latest of all, in decades; NaN without a date.

    >>> decades_before_last(np.array(["1984-01-01", "2004-01-01", ""], dtype=object)).round(2)
    array([ 2.,  0., nan])
    """
    days = np.array([np.nan if (d := first_day(str(text))) is None else d.toordinal() for text in dates])
    known = days[np.isfinite(days)]
    return np.asarray((known.max() - days) / DAYS_PER_DECADE if len(known) else days)


def grow_noise(table: pd.DataFrame, per_decade: float) -> tuple[pd.DataFrame, tuple[str, ...]]:
    """Widen what old samples are known to: by their age times `intake.noise_per_decade`, as fractions of 1.

    The half width of exact fractions (`resolution`) grows in quadrature, limits are moved apart. A sample without a date counts as
    old as the oldest.
    """
    if per_decade == 0.0 or not len(table):
        return table, ()
    age = decades_before_last(table["date"].to_numpy(dtype=object))
    if not np.isfinite(age).any():
        return table, ("noise_per_decade acts on nothing: no sample has a date",)
    undated = int(np.isnan(age).sum())
    grown = per_decade * np.where(np.isnan(age), np.nanmax(age), age)
    table = table.copy()
    measured = np.isfinite(table[list(PARTS)].to_numpy(dtype=np.float64)).any(axis=1)
    exact = np.nan_to_num(table["resolution"].to_numpy(dtype=np.float64))
    table["resolution"] = np.where(measured & (grown > 0.0), np.hypot(exact, grown), table["resolution"])
    for part in PARTS:
        table[f"{part}_low"] = np.maximum(table[f"{part}_low"] - grown, 0.0)
        table[f"{part}_high"] = np.minimum(table[f"{part}_high"] + grown, 1.0)
    note = f"fractions of samples are taken as known to ± {as_text(per_decade)} more for each decade before the latest, up to ± {grown.max():.3g}"
    return table, (note + (f"; {undated} undated ones count as the oldest" if undated else ""),)


def set_void(rows: pd.DataFrame, intake: Intake) -> tuple[str, ...]:
    """Set aside, in place, the rows that were taken in a void's polygon before its date.

    Returns
    -------
    notes : tuple of str
        Rows inside without a date, which stay.
    """
    notes = []
    for void in intake.void:
        inside = _inside(void, rows) & rows["fate"].isin(["used", "evidence"]).to_numpy()
        days = [first_day(str(text)) for text in rows["date"]]
        old = inside & np.array([day is not None and day < void.date for day in days], dtype=bool)
        undated = int((inside & np.array([day is None for day in days], dtype=bool)).sum())
        rows.loc[old, "reason"] = f"older than the {void.reason} of {void.date.isoformat()} at its place"
        rows.loc[old, "fate"], rows.loc[old, "deep"] = "set_aside", False
        if undated:
            notes.append(
                f"{undated} samples without a date lie where there was {void.reason} on {void.date.isoformat()}; DOUBT: they are kept"
            )
        if not inside.any():
            notes.append(f"no sample lies where there was {void.reason} on {void.date.isoformat()}; check its polygon")
    return tuple(notes)


def _inside(void: Void, rows: pd.DataFrame) -> npt.NDArray[np.bool_]:
    import shapely

    polygon = shapely.make_valid(shapely.Polygon(void.polygon))
    lon, lat = (rows[name].to_numpy(dtype=np.float64) for name in ("longitude", "latitude"))
    located = np.isfinite(lon) & np.isfinite(lat)
    inside = np.zeros(len(rows), dtype=bool)
    inside[located] = shapely.intersects_xy(polygon, lon[located], lat[located])
    return inside
