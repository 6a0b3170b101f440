"""Progress for a person: bars on a terminal, plain lines elsewhere, nothing where quiet was asked for."""

from __future__ import annotations

import os
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

__all__ = ["Lines", "make_progress"]

PATIENCE_S = 5.0  # a stage that is done sooner needs no line of its own in a log
PAUSE_S = 15.0  # between two lines on one stage
LEAST_DONE = 0.05  # of a stage; the first step also warms up, and its time tells little of the rest


@contextmanager
def make_progress(*, quiet: bool) -> Iterator[Any]:
    """Give a `texture.progress.Progress` that suits where the talk goes."""
    from texture.progress import Silent

    if quiet:
        yield Silent()
    elif sys.stderr.isatty() and os.environ.get("TERM") != "dumb":
        with _bars() as bars:
            yield bars
    else:
        yield Lines(lambda text: print(text, file=sys.stderr, flush=True))


@contextmanager
def _bars() -> Iterator[Any]:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, SpinnerColumn, TextColumn, TimeRemainingColumn

    columns = (
        SpinnerColumn(finished_text="✓"),
        TextColumn("{task.description:<30}"),
        BarColumn(bar_width=32),
        MofNCompleteColumn(),
        TimeRemainingColumn(compact=True, elapsed_when_finished=True),
    )
    with Progress(*columns, console=Console(stderr=True), transient=False) as bars:
        yield _Bars(bars)


class _Bars:
    """Stages as bars of rich, numbered."""

    def __init__(self, bars: Any) -> None:
        self._bars, self._count = bars, 0

    @contextmanager
    def stage(self, name: str, total: int | None = None) -> Iterator[Callable[[int], None]]:
        self._count += 1
        task = self._bars.add_task(f"{self._count} {name}", total=total)
        yield lambda steps: self._bars.advance(task, steps)
        done = self._bars.tasks[task].total or 1
        self._bars.update(task, total=done, completed=done)


class Lines:
    """Stages as plain lines, for a log: only of those that take a while, and then now and again.

    Parameters
    ----------
    say : callable
        Takes one line.
    clock : callable
        Seconds that only grow.
    """

    def __init__(self, say: Callable[[str], None], clock: Callable[[], float] = time.monotonic) -> None:
        self._say, self._clock, self._count = say, clock, 0

    @contextmanager
    def stage(self, name: str, total: int | None = None) -> Iterator[Callable[[int], None]]:
        """Say that a stage goes on, how far it is and how long it may take; and at its end how long it took."""
        self._count += 1
        title, start, done = f"… {self._count} {name}", self._clock(), 0
        told = start + PATIENCE_S - PAUSE_S

        def advance(steps: int) -> None:
            nonlocal done, told
            done, now = done + steps, self._clock()
            if total and now - told >= PAUSE_S and total * LEAST_DONE <= done < total:
                told = now
                left = (now - start) * (total - done) / done
                self._say(
                    f"{title}: {100 * done / total:.0f} % ({done:,} of {total:,}), about {seconds_text(left)} left"
                )

        # What cannot count its steps says at least that it is at work.
        waiting = threading.Timer(PATIENCE_S, lambda: self._say(f"{title} …")) if total is None else None
        if waiting is not None:
            waiting.daemon = True
            waiting.start()
        try:
            yield advance
        finally:
            if waiting is not None:
                waiting.cancel()
        took = self._clock() - start
        if took >= PATIENCE_S:
            self._say(f"{title}: done in {seconds_text(took)}")


def seconds_text(seconds: float) -> str:
    """Say a time as a person would.

    >>> seconds_text(0.4), seconds_text(75), seconds_text(7260)
    ('1 s', '1 min 15 s', '2 h 1 min')
    """
    whole = max(round(seconds), 1)
    if whole < 60:
        return f"{whole} s"
    minutes, rest = divmod(whole, 60)
    if minutes < 60:
        return f"{minutes} min {rest} s" if rest else f"{minutes} min"
    return f"{minutes // 60} h {minutes % 60} min"
