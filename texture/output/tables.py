"""Plain tables."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["write_csv"]


def write_csv(path: Path, frame: pd.DataFrame) -> None:
    """Write a table as UTF-8 CSV: comma, decimal point, one line feed a row, blank where unknown.

    Numbers have the fewest digits that give the same number back.
    """
    frame.to_csv(path, index=False, lineterminator="\n", encoding="utf-8")
