"""Progress bars on a terminal, silence elsewhere."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

__all__ = ["make_progress"]


@contextmanager
def make_progress(*, quiet: bool) -> Iterator[Any]:
    """Give a `texture.progress.Progress` that suits where the talk goes."""
    from texture.progress import Silent

    if quiet or not sys.stderr.isatty():
        yield Silent()
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, SpinnerColumn, TextColumn, TimeRemainingColumn

    columns = (
        SpinnerColumn(finished_text="✓"),
        TextColumn("{task.description:<28}"),
        BarColumn(bar_width=32),
        MofNCompleteColumn(),
        TimeRemainingColumn(compact=True, elapsed_when_finished=True),
    )
    with Progress(*columns, console=Console(stderr=True), transient=False) as bars:
        yield _Bars(bars)


class _Bars:
    """Stages as bars of rich."""

    def __init__(self, bars: Any) -> None:
        self._bars = bars

    @contextmanager
    def stage(self, name: str, total: int | None = None) -> Iterator[Callable[[int], None]]:
        task = self._bars.add_task(name, total=total)
        yield lambda steps: self._bars.advance(task, steps)
        done = self._bars.tasks[task].total or 1
        self._bars.update(task, total=done, completed=done)
