"""Running pieces of a loop on threads: compiled code lets go of the interpreter.

Each piece must write what is its own alone, so that the number of threads changes nothing.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

__all__ = ["in_parts_of_equal_cost", "on_threads"]

T = TypeVar("T")


def on_threads(run: Callable[[int, int], None], count: int, at_once: int) -> None:
    """Call ``run(first, last)`` on pieces of 0..count, on as many threads as compiled code uses."""
    begins = np.arange(0, count, at_once)
    _run(run, begins, np.minimum(begins + at_once, count))


def in_parts_of_equal_cost(run: Callable[[int, int], T], cost: NDArray[np.int64]) -> list[T]:
    """Call ``run(first, last)`` on pieces of about equal cost and return what they return, in order."""
    from numba import get_num_threads

    threads = int(get_num_threads())
    if len(cost) == 0:
        return []
    total = np.cumsum(cost)
    pieces = 1 if threads == 1 or total[-1] < 2000 else 8 * threads
    ends = np.searchsorted(total, np.linspace(0.0, float(total[-1]), pieces + 1)[1:])
    ends[-1] = len(cost) - 1
    bounds = np.unique(np.concatenate([[0], ends + 1]))
    return _run(run, bounds[:-1], bounds[1:])


def _run(run: Callable[[int, int], T], begins: NDArray[np.int64], ends: NDArray[np.int64]) -> list[T]:
    from numba import get_num_threads

    threads = min(int(get_num_threads()), len(begins))
    if threads <= 1:
        return [run(*piece) for piece in zip(begins.tolist(), ends.tolist(), strict=True)]
    with ThreadPoolExecutor(threads) as pool:
        return list(pool.map(run, begins.tolist(), ends.tolist()))
