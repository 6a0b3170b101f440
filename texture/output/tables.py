"""Plain tables."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from texture.stations.writing import safe_table

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["write_csv"]


def write_csv(path: Path, frame: pd.DataFrame) -> None:
    """Write a table as UTF-8 CSV: comma, decimal point, one line feed a row, blank where unknown.

    Numbers have the fewest digits that give the same number back; a text that a spreadsheet program would take
    for a formula is led by an apostrophe.
    """
    safe_table(frame).to_csv(path, index=False, lineterminator="\n", encoding="utf-8")
