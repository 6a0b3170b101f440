"""Old samples say less of the present bed."""

from __future__ import annotations

import datetime as dt

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.stations.audit import as_text

__all__ = ["decades_before_last", "first_day", "grow_noise"]

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
