"""Where in which file something stands: the one way in which messages of this room name a place."""

from __future__ import annotations

from dataclasses import dataclass

from texture.errors import SampleError

__all__ = ["Where", "shown"]


def shown(cell: object) -> str:
    """Text of a cell as a message quotes it, shortened.

    >>> shown("no recovery"), shown(12.5), shown(None)
    ('"no recovery"', '12.5', 'nothing')
    """
    if cell is None or cell == "":
        return "nothing"
    if isinstance(cell, str):
        text = " ".join(cell.split())
        return f'"{text if len(text) <= 60 else text[:57] + "…"}"'
    if isinstance(cell, float):
        return f"{cell:.10g}"
    return str(cell)[:60]


@dataclass(frozen=True)
class Where:
    """A file, a sheet (empty for text tables) and the heading of a column (empty for the whole row).

    `sample` tells what a sample is there: a row; a column, where samples stand side by side; or a certificate.
    """

    file: str
    sheet: str = ""
    column: str = ""
    sample: str = "row"

    def at(self, column: str) -> Where:
        """Return the same file and sheet with another column."""
        return Where(self.file, self.sheet, column, self.sample)

    def text(self, row: int | None = None) -> str:
        """Words for the place; rows are numbered as the spreadsheet shows them, from 1."""
        words = self.file
        if self.sheet:
            words += f', sheet "{self.sheet}"'
        if row is not None:
            words += f", {self.sample} {row}"
        if self.column:
            words += f', {"row" if self.sample == "column" else "column"} "{self.column}"'
        return words

    def error(self, found: str, expected: str, do: str, row: int | None = None) -> SampleError:
        """One line: where, what was found, what was expected, what to do."""
        return SampleError(f"{self.text(row)}: found {found}, expected {expected}; {do}")
