"""Pieces of a loop on threads."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

__all__ = ["on_threads"]


def on_threads(run: Callable[[int, int], None], count: int, at_once: int) -> None:
    """Call ``run(first, last)`` on pieces of 0..count, on as many threads as compiled code uses.

    Each piece must write what is its own alone, so that the number of threads changes nothing.
    """
    from numba import get_num_threads

    begins = range(0, count, at_once)
    threads = min(int(get_num_threads()), len(begins))
    if threads <= 1:
        for begin in begins:
            run(begin, min(begin + at_once, count))
        return
    with ThreadPoolExecutor(threads) as pool:
        for _ in pool.map(lambda begin: run(begin, min(begin + at_once, count)), begins):
            pass
