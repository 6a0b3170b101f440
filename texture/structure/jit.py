"""The one way in which functions are compiled here."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from functools import lru_cache
from importlib import resources
from typing import Any, TypeVar, cast

from numba import njit

__all__ = ["compiled"]

F = TypeVar("F", bound=Callable[..., Any])

_PACKAGES = ("texture.structure", "texture.predict")


@lru_cache(maxsize=1)
def _stamp() -> tuple[str, int]:
    """Digest of every source that compiled functions, or constants compiled into them, may come from."""
    digest, count = hashlib.sha256(), 0
    for package in _PACKAGES:
        for file in sorted(resources.files(package).iterdir(), key=lambda f: f.name):
            if file.name.endswith(".py"):
                digest.update(file.read_bytes())
                count += 1
    return digest.hexdigest(), count


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
