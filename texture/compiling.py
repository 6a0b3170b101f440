"""The one way in which functions are compiled here, and what tells a kept one that it is out of date."""

from __future__ import annotations

import ast
import hashlib
from collections.abc import Callable, Iterator
from functools import cache
from importlib.util import find_spec
from typing import Any, TypeVar, cast, overload

from numba import njit

__all__ = ["compiled", "source_stamp", "sources"]

F = TypeVar("F", bound=Callable[..., Any])


@overload
def compiled(function: F) -> F: ...


@overload
def compiled(*, parallel: bool) -> Callable[[Callable[..., Any]], Any]: ...


def compiled(function: Callable[..., Any] | None = None, *, parallel: bool = False) -> Any:
    """Compile for the first types it is called with and keep the result on disk.

    Division follows IEEE (no Python exceptions), the interpreter lock is let go, and fast-math stays off: sums keep
    their order, so that results do not depend on vector width or on where in a block a value stands. With
    ``@compiled(parallel=True)`` a loop over `numba.prange` runs on several threads.
    """
    if function is None:
        return lambda f: _compile(f, parallel)
    return _compile(function, parallel)


def _compile(function: Callable[..., Any], parallel: bool) -> Any:
    dispatcher: Any = njit(cache=True, nogil=True, error_model="numpy", parallel=parallel)(function)
    # numba keeps a compiled function as long as its own file is unchanged, although functions and constants of other
    # files were compiled into it; here it is kept as long as all of them are.
    dispatcher._cache._cache_file._source_stamp = source_stamp(function.__module__)
    return dispatcher


@cache
def source_stamp(module: str) -> tuple[str, ...]:
    """Digests of a module's source and of every source that it takes names from, near or far, in its own package."""
    return tuple(hashlib.sha256(_source(name).encode()).hexdigest() for name in sorted(sources(module)))


def sources(module: str) -> set[str]:
    """Names of the module and of those whose names it imports at its head, and so on from them, in its own package."""
    found, left = set(), [module]
    while left:
        name = left.pop()
        if name not in found:
            found.add(name)
            left += _imported(name)
    return found


@cache
def _imported(module: str) -> tuple[str, ...]:
    return tuple(_own_imports(ast.parse(_source(module)), module.partition(".")[0]))


def _own_imports(tree: ast.Module, package: str) -> Iterator[str]:
    # What is imported inside a function, or for types alone, cannot be compiled in.
    for node in tree.body:
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom) and node.module:
            # A name may itself be a module.
            names = [node.module, *(f"{node.module}.{alias.name}" for alias in node.names)]
        else:
            continue
        yield from (n for n in names if n.partition(".")[0] == package and _is_module(n))


def _is_module(name: str) -> bool:
    try:
        return find_spec(name) is not None
    except ModuleNotFoundError:  # a name in a module that is no package
        return False


def _source(module: str) -> str:
    spec = find_spec(module)
    loader: Any = spec.loader if spec else None
    return cast(str, loader.get_source(module) or "") if loader else ""
