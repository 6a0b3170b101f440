"""How long each stage of a run took, by the wall clock."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field

__all__ = ["Clock"]


@dataclass
class Clock:
    """Seconds of each stage, in the order they were run."""

    seconds: dict[str, float] = field(default_factory=dict)

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """Time a stage; the same name adds up."""
        start = time.perf_counter()
        try:
            yield
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - start

    @property
    def total(self) -> float:
        """Seconds of all stages together."""
        return sum(self.seconds.values())
