"""The same survey in two spreadsheets: found by what it says, and counted once."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

__all__ = ["find_copies"]

FEWEST = 5  # shared samples; a few may agree by chance, pure sand at one mooring for instance
SHARE = 0.2  # of the smaller survey
PLACE_DIGITS = 4  # of degrees, about 10 m: the two sheets may round positions differently
PART_DIGITS = 6


def find_copies(rows: pd.DataFrame) -> tuple[npt.NDArray[np.int64], list[str]]:
    """Find rows that stand, with the same place and fractions, in a survey read before.

    Two surveys are taken for copies only if they share at least five samples and a fifth of the smaller one.

    Parameters
    ----------
    rows : DataFrame
        Used rows in reading order with survey, longitude, latitude, mud, sand, gravel and kind.

    Returns
    -------
    original : int array, shape (n_rows,)
        Number of the row that each row is a copy of, or -1.
    notes : list of str
    """
    n = len(rows)
    original = np.full(n, -1, dtype=np.int64)
    survey = rows["survey"].to_numpy()
    measured = np.flatnonzero(~rows["kind"].isin(["description", "median_only", "hard_ground"]).to_numpy())
    if len(measured) == 0 or len(pd.unique(survey[measured])) < 2:
        return original, []
    keys = rows.iloc[measured][["longitude", "latitude"]].round(PLACE_DIGITS)
    keys = keys.join(rows.iloc[measured][["mud", "sand", "gravel"]].round(PART_DIGITS).fillna(-1.0))
    group = keys.groupby(list(keys.columns), sort=False).ngroup().to_numpy()
    first = np.full(group.max() + 1, -1, dtype=np.int64)
    first[group[::-1]] = measured[::-1]
    head = first[group]
    other = survey[head] != survey[measured]
    notes: list[str] = []
    sizes = pd.Series(survey[measured]).value_counts()
    pairs = pd.DataFrame({"one": survey[head[other]], "two": survey[measured[other]]})
    shared = pairs.groupby(["one", "two"], sort=False).size().reset_index(name="count")
    for one, two, count in zip(shared["one"], shared["two"], shared["count"], strict=True):
        smaller = int(min(sizes[one], sizes[two]))
        if count < max(FEWEST, SHARE * smaller):
            continue
        hit = other & (survey[head] == one) & (survey[measured] == two)
        original[measured[hit]] = head[hit]
        notes.append(f'surveys "{one}" and "{two}" share {count} samples of the same place and fractions: counted once')
    return original, notes
