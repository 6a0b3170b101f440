"""The one way in which functions are compiled here."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

from numba import njit

__all__ = ["compiled"]

F = TypeVar("F", bound=Callable[..., Any])


def compiled(function: F) -> F:
    """Compile for the first types it is called with and keep the result on disk.

    Division follows IEEE (no Python exceptions), the interpreter lock is let go, and fast-math stays off: sums keep
    their order, so that results do not depend on vector width or on where in a block a value stands.
    """
    return cast(F, njit(cache=True, nogil=True, error_model="numpy")(function))
