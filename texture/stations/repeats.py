"""Repeated samples of one survey at one place: one station with their mean, their spread kept."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

__all__ = ["merge_repeats"]

FloatArray = npt.NDArray[np.float64]
SAME_PLACE_DEGREES = 1e-6  # 0.1 m: equal positions that went through a projection differ by far less
PARTS = ("mud", "sand", "gravel")


def merge_repeats(
    rows: pd.DataFrame, copies: npt.NDArray[np.bool_] | None = None
) -> tuple[pd.DataFrame, npt.NDArray[np.int64]]:
    """Merge rows of one survey at one place by the arithmetic mean of their fractions.

    Mass is what a patch of bed shares out, so fractions are averaged, not log-ratios: the log-ratio mean of 0
    and 40 % gravel is 4.5 %. A row that knows only some parts counts for those; the others are scaled to what is
    left. Slices of one core (rows that begin at different depths) are weighted by their thickness above the recipe's
    `surface_m` and count as one sample. Rows told only in words or by a median give way to a measured row. Hard ground is
    never merged. Limits of rows that are not exact are averaged with the exact values beside them.

    Parameters
    ----------
    rows : DataFrame
        Used and evidence rows in reading order, with survey, longitude, latitude, mud, sand, gravel, kind,
        described_class, resolution, `<part>_low`, `<part>_high`, median_phi, top_m and thickness_m (down to `surface_m`; NaN where the lower end is unknown).
    copies : bool array, shape (n_rows,), optional
        Rows that stand in another spreadsheet too, under the survey and place of their original; they join its group
        without counting.

    Returns
    -------
    stations : DataFrame
        The first row of each group with the merged fractions, `repeats` and `repeat_sd_<part>` (NaN for one row).
    member : int array, shape (n_rows,)
        Number of the station that each row belongs to.

    Examples
    --------
    >>> rows = pd.DataFrame({"survey": "a", "longitude": [3.0, 3.0], "latitude": [54.0, 54.0], "mud": [0.2, 0.4],
    ...     "sand": [0.8, 0.2], "gravel": [0.0, 0.4], "kind": "sieve", "described_class": "", "resolution": 0.005,
    ...     **{f"{p}_{e}": float("nan") for p in PARTS for e in ("low", "high")}, "median_phi": float("nan"),
    ...     "top_m": 0.0, "thickness_m": 0.1})
    >>> merge_repeats(rows)[0][["mud", "sand", "gravel", "repeats"]].values.round(6).tolist()
    [[0.3, 0.5, 0.2, 2.0]]
    """
    n = len(rows)
    hard = (rows["kind"] == "hard_ground").to_numpy()
    words = rows["kind"].isin(["description", "median_only"]).to_numpy()
    key = pd.DataFrame(
        {
            "survey": rows["survey"].to_numpy(),
            "x": np.round(rows["longitude"].to_numpy() / SAME_PLACE_DEGREES).astype(np.int64),
            "y": np.round(rows["latitude"].to_numpy() / SAME_PLACE_DEGREES).astype(np.int64),
            "alone": np.where(hard, np.arange(n), -1),
        }
    )
    place = _numbered(key)
    n_places = int(place.max()) + 1 if n else 0
    measured = np.bincount(place, weights=~words, minlength=n_places) > 0
    # Where nothing was measured, different words stay apart: each is a reading of its own.
    told = np.where(words & ~measured[place], rows["described_class"].to_numpy(), "")
    group = _numbered(key.assign(told=told))
    size = np.bincount(group, minlength=group.max() + 1 if n else 0)
    # A measured row leads its group even where a description of the same place was read first.
    measured = np.bincount(group, weights=~words, minlength=len(size)) > 0
    counts = ~(words & measured[group])
    if copies is not None:
        counts &= ~copies
    leader = _first_of_each(group, counts, len(size))
    stations = rows.iloc[leader].copy().reset_index(drop=True)
    stations["repeats"] = np.bincount(group, weights=counts, minlength=len(size)).astype(np.int64)
    for part in PARTS:
        stations[f"repeat_sd_{part}"] = np.nan
    several = np.bincount(group, weights=counts, minlength=len(size)) > 1
    if several.any():
        slices = _are_slices(rows["top_m"].to_numpy(), group, counts, len(size))
        stations.loc[slices, "repeats"] = 1
        weight = np.where(slices[group], rows["thickness_m"].fillna(rows["thickness_m"].median()).fillna(1.0), 1.0)
        _average(rows, stations, group, counts, several, weight)
        stations.loc[slices, [f"repeat_sd_{part}" for part in PARTS]] = np.nan
    return stations, group


def _are_slices(
    top: FloatArray, group: npt.NDArray[np.int64], counts: npt.NDArray[np.bool_], n_groups: int
) -> npt.NDArray[np.bool_]:
    """Whether the rows of a group begin at different depths below the surface of the bed."""
    highest, lowest = np.full(n_groups, -np.inf), np.full(n_groups, np.inf)
    np.maximum.at(highest, group[counts], top[counts])
    np.minimum.at(lowest, group[counts], top[counts])
    return highest > lowest


def _numbered(key: pd.DataFrame) -> npt.NDArray[np.int64]:
    """Number of each row's group, in order of first appearance."""
    return key.groupby(list(key.columns), sort=False).ngroup().to_numpy().astype(np.int64)


def _first_of_each(group: npt.NDArray[np.int64], counts: npt.NDArray[np.bool_], n_groups: int) -> npt.NDArray[np.int64]:
    leader = np.full(n_groups, -1, dtype=np.int64)
    rows = np.flatnonzero(counts)
    leader[group[rows][::-1]] = rows[::-1]
    return leader


def _average(
    rows: pd.DataFrame,
    stations: pd.DataFrame,
    group: npt.NDArray[np.int64],
    counts: npt.NDArray[np.bool_],
    several: npt.NDArray[np.bool_],
    weight: FloatArray,
) -> None:
    take = several[group] & counts
    index, n, weight = group[take], len(several), weight[take]
    values = rows.loc[:, list(PARTS)].to_numpy(dtype=np.float64)[take]
    known = np.isfinite(values)
    mean, spread = np.full((n, 3), np.nan), np.full((n, 3), np.nan)
    for k in range(3):
        number = np.bincount(index, weights=known[:, k], minlength=n)
        total = np.bincount(index, weights=np.where(known[:, k], weight * values[:, k], 0.0), minlength=n)
        with np.errstate(invalid="ignore", divide="ignore"):
            mean[:, k] = total / np.bincount(index, weights=weight * known[:, k], minlength=n)
            away = np.where(known[:, k], values[:, k] - mean[index, k], 0.0)
            spread[:, k] = np.sqrt(np.bincount(index, weights=away**2, minlength=n) / (number - 1.0))
        spread[number < 2, k] = np.nan
    mean = _consistent(mean, values, index, n, weight)
    for k, part in enumerate(PARTS):
        stations.loc[several, part] = mean[several, k]
        stations.loc[several, f"repeat_sd_{part}"] = spread[several, k]
    _average_limits(rows[take], values, mean, stations, several, index, weight)
    largest = pd.Series(rows["resolution"].to_numpy()[take]).groupby(index).max()
    stations.loc[largest.index, "resolution"] = largest.to_numpy()
    full = np.isfinite(mean).all(axis=1) & several & (stations["kind"] == "partial").to_numpy()
    if full.any():  # led by a partial row, completed by another one
        kinds = rows["kind"].to_numpy()[take]
        better = pd.Series(kinds)[kinds != "partial"].groupby(index[kinds != "partial"]).first()
        stations.loc[full, "kind"] = better.reindex(np.flatnonzero(full)).fillna("partial").to_numpy()


def _average_limits(
    rows: pd.DataFrame,
    values: FloatArray,
    mean: FloatArray,
    stations: pd.DataFrame,
    several: npt.NDArray[np.bool_],
    index: npt.NDArray[np.int64],
    weight: FloatArray,
) -> None:
    """Mean of the limits in groups where any row has them, and mean of the median sizes."""
    n = len(several)

    def averaged(numbers: FloatArray) -> FloatArray:
        known = np.isfinite(numbers)
        total = np.bincount(index, weights=np.where(known, weight * numbers, 0.0), minlength=n)
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray(total / np.bincount(index, weights=weight * known, minlength=n))

    stations.loc[several, "median_phi"] = averaged(rows["median_phi"].to_numpy(dtype=np.float64))[several]
    limits = {name: rows[name].to_numpy(dtype=np.float64) for part in PARTS for name in (f"{part}_low", f"{part}_high")}
    inexact = np.isfinite(np.column_stack(list(limits.values()))).any(axis=1)
    touched = several & (np.bincount(index, weights=inexact, minlength=n) > 0)
    for k, part in enumerate(PARTS):
        for end, outermost in (("low", np.fmin), ("high", np.fmax)):
            given = limits[f"{part}_{end}"]
            found = outermost(averaged(np.where(np.isfinite(given), given, values[:, k])), mean[:, k])
            found = np.where(np.isfinite(mean[:, k]), np.clip(found, 0.0, 1.0), np.nan)
            stations.loc[several, f"{part}_{end}"] = np.where(touched, found, np.nan)[several]


def _consistent(
    mean: FloatArray, values: FloatArray, index: npt.NDArray[np.int64], n: int, weight: FloatArray
) -> FloatArray:
    """Make the means of groups in which some rows know more than others sum to 1.

    Beside complete rows, a row that knows less moves the mean of what it knows, mud say; the others keep the
    ratio of the complete rows. Among rows that are all partial, only what each of them knows is kept.
    """
    full = np.isfinite(values).all(axis=1)
    rows, complete = np.bincount(index, minlength=n), np.bincount(index, weights=full, minlength=n)
    own: FloatArray = np.column_stack(
        [np.bincount(index, weights=np.where(full, weight * values[:, k], 0.0), minlength=n) for k in range(3)]
    )
    with np.errstate(invalid="ignore"):
        own = own / np.bincount(index, weights=weight * full, minlength=n)[:, None]
    mixed = (complete > 0) & (complete < rows)
    rest = own[:, 1] + own[:, 2]
    with np.errstate(invalid="ignore", divide="ignore"):
        scaled = np.column_stack([mean[:, 0], own[:, 1:] * ((1.0 - mean[:, 0]) / rest)[:, None]])
    mean = np.where(mixed[:, None], np.where((rest > 0.0)[:, None], scaled, own), mean)
    known = np.column_stack([np.bincount(index, weights=np.isfinite(values[:, k]), minlength=n) for k in range(3)])
    unequal = (complete == 0)[:, None] & (known < rows[:, None]) & (known == rows[:, None]).any(axis=1)[:, None]
    mean = np.where(unequal, np.nan, mean)
    total = mean.sum(axis=1)
    close = np.isfinite(total) & (total > 0.0)
    mean[close] /= total[close, None]
    return mean
