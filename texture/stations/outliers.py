"""Stations that disagree with all others: flagged with how much, and kept."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt
import pandas as pd

from texture.stations.audit import AUDIT_COLUMNS, as_text

__all__ = ["FLAGGED_FROM", "flag_outliers"]

FLAGGED_FROM = 4.0  # standard errors; one normal value in 16,000 lies that far out


def flag_outliers(
    table: pd.DataFrame,
    z: npt.ArrayLike,
    coordinates: Sequence[str] | None = None,
    flagged_from: float = FLAGGED_FROM,
) -> tuple[npt.NDArray[np.float64], pd.DataFrame]:
    """Flag the stations whose leave-one-out standardised error is large in any coordinate.

    Parameters
    ----------
    table : DataFrame, n rows
        With file, sheet and row.
    z : array-like, shape (n,) or (n, d)
        (measured - predicted from all other stations) / standard error of that prediction, noise included; NaN where
        unknown.
    coordinates : sequence of str, length d, optional
        What to call the coordinates in the audit.
    flagged_from : float
        Size of error that is flagged when exceeded.

    Returns
    -------
    worst : float array, shape (n,)
        The error of largest size of each station, with its sign; NaN where none is known.
    audit : DataFrame
        One row for each flagged station.

    Raises
    ------
    ValueError
        If there are not as many errors as stations.

    Examples
    --------
    >>> table = pd.DataFrame({"file": "a.csv", "sheet": "", "row": [2, 3, 4]})
    >>> worst, audit = flag_outliers(table, [[0.3, -5.5], [np.nan, np.nan], [1.0, -2.0]])
    >>> worst, audit["row"].tolist()
    (array([-5.5,  nan, -2. ]), [2])
    """
    errors = np.asarray(z, dtype=np.float64)
    errors = errors[:, None] if errors.ndim == 1 else errors
    if len(errors) != len(table):
        raise ValueError(f"z: found errors of {len(errors)} stations, expected {len(table)}")
    size = np.where(np.isfinite(errors), np.abs(errors), -1.0)
    place = size.argmax(axis=1) if errors.shape[1] else np.zeros(len(errors), dtype=np.int64)
    worst = (
        np.take_along_axis(errors, place[:, None], axis=1)[:, 0] if errors.shape[1] else np.full(len(errors), np.nan)
    )
    worst = np.where(size.max(axis=1, initial=-1.0) >= 0.0, worst, np.nan)
    hit = np.flatnonzero(np.abs(worst) > flagged_from)
    names = list(coordinates) if coordinates is not None else [f"coordinate {k + 1}" for k in range(errors.shape[1])]
    audit = table.iloc[hit][["file", "sheet", "row"]].reset_index(drop=True)
    audit["column"] = [names[k] for k in place[hit]]
    audit["old"] = ""
    audit["new"] = [as_text(v) for v in worst[hit]]
    audit["rule"] = f"flagged, not dropped: more than {flagged_from:g} standard errors from what all other stations say"
    return worst, audit[list(AUDIT_COLUMNS)]
