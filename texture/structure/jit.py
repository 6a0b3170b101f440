"""The one way in which functions are compiled here."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from functools import lru_cache
from pathlib import Path
from typing import Any, TypeVar, cast

from numba import njit

__all__ = ["compiled"]

F = TypeVar("F", bound=Callable[..., Any])

# Every file with compiled functions or constants compiled into them, from the package's root.
_SOURCES = ("structure/models.py", "structure/compiled.py", "structure/vecchia.py", "predict/neighbours.py",
            "predict/tiles.py", "structure/linear.py", "predict/block.py", "predict/kernel.py", "predict/window.py")  # fmt: skip


@lru_cache(maxsize=1)
def _stamp() -> tuple[str, int]:
    root = Path(__file__).resolve().parents[1]
    digest = hashlib.sha256()
    for name in _SOURCES:
        file = root / name
        digest.update(file.read_bytes() if file.exists() else b"")
    return digest.hexdigest(), len(_SOURCES)


def compiled(function: F) -> F:
    """Compile for the first types it is called with and keep the result on disk.

    Division follows IEEE (no Python exceptions), the interpreter lock is let go, and fast-math stays off: sums keep
    their order, so that results do not depend on vector width or on where in a block a value stands.
    """
    dispatcher: Any = njit(cache=True, nogil=True, error_model="numpy")(function)
    # numba keeps a compiled function as long as its own file is unchanged, although functions of other files were
    # compiled into it; here it is kept as long as all of them are.
    dispatcher._cache._cache_file._source_stamp = _stamp()
    return cast(F, dispatcher)
