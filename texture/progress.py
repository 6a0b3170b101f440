"""What a long run tells while it works: stages, and steps inside a stage."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager
from typing import Protocol

__all__ = ["Progress", "Silent"]

Advance = Callable[[int], None]


class Progress(Protocol):
    """Anything that can show stages; the command line brings bars, a notebook may bring its own."""

    def stage(self, name: str, total: int | None = None) -> AbstractContextManager[Advance]:
        """Open a stage of `total` steps (None: unknown); the given function advances it."""
        ...


class Silent:
    """Shows nothing."""

    @contextmanager
    def stage(self, name: str, total: int | None = None) -> Iterator[Advance]:
        """Do nothing, and let the caller count."""
        yield lambda steps: None
