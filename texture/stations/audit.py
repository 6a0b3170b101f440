"""The log of every reading that was not plain and every change: file, sheet, row, column, old, new, rule."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from texture.stations.where import Where

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["AUDIT_COLUMNS", "AuditLog", "as_text"]

AUDIT_COLUMNS = ("file", "sheet", "row", "column", "old", "new", "rule")


def as_text(value: object) -> str:
    """Text of a value as the audit shows it: numbers to seven digits, nothing as an empty text.

    >>> as_text(0.00650000001), as_text(float("nan")), as_text("<1")
    ('0.0065', '', '<1')
    """
    if value is None:
        return ""
    if isinstance(value, (float, np.floating)):
        return "" if np.isnan(value) else f"{float(value):.7g}"
    return str(value)


class AuditLog:
    """Collect audit rows in blocks and hand them out as one table, in order of file, sheet and row."""

    def __init__(self) -> None:
        self._blocks: list[dict[str, Any]] = []

    def add(
        self,
        where: Where,
        rows: npt.NDArray[np.int64] | Sequence[int],
        old: Sequence[object] | npt.NDArray[Any],
        new: Sequence[object] | npt.NDArray[Any],
        rule: str | Sequence[str],
    ) -> None:
        """Add one row for each of `rows`; `where.column` names the column."""
        if not len(rows):
            return
        self._blocks.append(
            {
                "file": where.file,
                "sheet": where.sheet,
                "row": np.asarray(rows, dtype=np.int64),
                "column": where.column,
                "old": [as_text(v) for v in old],
                "new": [as_text(v) for v in new],
                "rule": rule if isinstance(rule, str) else list(rule),
            }
        )

    def take_over(self, other: AuditLog, without: npt.NDArray[np.int64]) -> None:
        """Take the rows of another log, except those of some spreadsheet rows (totals, notes)."""
        for block in other._blocks:
            keep = ~np.isin(block["row"], without)
            if keep.any():
                lists = {
                    k: [v for v, ok in zip(block[k], keep, strict=True) if ok]
                    for k in ("old", "new", "rule")
                    if isinstance(block[k], list)
                }
                self._blocks.append({**block, **lists, "row": block["row"][keep]})

    def table(self) -> pd.DataFrame:
        """Return all rows as a DataFrame with the columns of `AUDIT_COLUMNS`."""
        import pandas as pd

        if not self._blocks:
            return pd.DataFrame({c: pd.Series(dtype=np.int64 if c == "row" else object) for c in AUDIT_COLUMNS})
        table = pd.concat([pd.DataFrame(block) for block in self._blocks], ignore_index=True)
        table = table.sort_values(["file", "sheet", "row"], kind="stable", ignore_index=True)
        return table[list(AUDIT_COLUMNS)]
