"""A scratch file for what is made in one order and used in another: its size does not count as memory."""

from __future__ import annotations

from pathlib import Path
from types import TracebackType

import numpy as np
from numpy.typing import NDArray

__all__ = ["Scratch"]

Floats = NDArray[np.float64]


class Scratch:
    """Numbers on disk, shape (members, rows, width), written and read by blocks.

    Parameters
    ----------
    path : path
        Made new; the caller's folder is thrown away with it.
    members, rows, width : int
    """

    def __init__(self, path: Path, members: int, rows: int, width: int) -> None:
        self.members, self.rows, self.width = members, rows, width
        self._file = path.open("w+b")

    def __enter__(self) -> Scratch:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._file.close()

    def write(self, member: int, first: int, block: Floats) -> None:
        """Put rows (m, width) of one member, counted from 0."""
        self._file.seek(8 * self.width * (member * self.rows + first))
        self._file.write(np.ascontiguousarray(block, dtype=np.float64).data)

    def read(self, member: int, first: int = 0, last: int | None = None) -> Floats:
        """Rows first..last of one member, shape (m, width)."""
        count = (self.rows if last is None else last) - first
        self._file.seek(8 * self.width * (member * self.rows + first))
        found = np.fromfile(self._file, dtype=np.float64, count=count * self.width)
        return found.reshape(count, self.width)

    def read_all(self, first: int, last: int) -> Floats:
        """Rows first..last of all members, shape (members, m, width)."""
        return np.stack([self.read(j, first, last) for j in range(self.members)])
