"""Who is split from whom: the nested tree of part names behind every set of log-ratio coordinates.

A tree is a pair of branches; a branch is a part name or another pair. ``["mud", ["gravel", "sand"]]`` splits mud
from the coarse rest, then gravel from sand. The first branch of a pair is the numerator. Coordinates are numbered
from the root down, numerator branch first. The same tree is the sequential binary partition of an ilr basis
(Egozcue & Pawlowsky-Glahn 2005).
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from texture.errors import CompositionError

__all__ = ["Partition", "Split", "Tree", "default_tree"]

Tree = str | tuple["Tree", "Tree"]

_FINE_TO_COARSE = ("clay", "silt", "mud", "sand", "gravel")
_FINE = ("clay", "silt", "mud")


@dataclass(frozen=True)
class Split:
    """One split: column numbers of its two sides, in ascending order."""

    numerator: tuple[int, ...]
    denominator: tuple[int, ...]


@dataclass(frozen=True)
class Partition:
    """A checked tree over part names, with what forward and inverse transforms need of it.

    Parameters
    ----------
    parts : sequence of str
        Part names in column order.
    tree : nested pairs of str, optional
        Every part once; `default_tree` when left out.

    Attributes
    ----------
    splits : tuple of Split
        From the root down.
    paths : tuple of tuple of (int, bool)
        For each part the splits from the root to it and whether it stands in the numerator.

    Examples
    --------
    >>> Partition(("mud", "sand", "gravel")).tree
    ('mud', ('gravel', 'sand'))
    """

    parts: tuple[str, ...]
    tree: Tree
    splits: tuple[Split, ...]
    paths: tuple[tuple[tuple[int, bool], ...], ...]

    def __init__(self, parts: Sequence[str], tree: object | None = None) -> None:
        names = tuple(parts)
        if isinstance(parts, str) or len(names) < 2 or not all(isinstance(p, str) and p for p in names):
            raise CompositionError(f"parts = {parts!r}, expected two or more part names")
        if len(set(names)) != len(names):
            raise CompositionError(f"parts = {list(names)}, expected each name once")
        checked = default_tree(names) if tree is None else _freeze(tree)
        leaves = list(_leaves(checked))
        if sorted(leaves) != sorted(names):
            raise CompositionError(f"tree has the parts {leaves}, expected each of {list(names)} exactly once")
        splits: list[Split] = []
        paths: dict[str, tuple[tuple[int, bool], ...]] = {}
        _walk(checked, names, (), splits, paths)
        object.__setattr__(self, "parts", names)
        object.__setattr__(self, "tree", checked)
        object.__setattr__(self, "splits", tuple(splits))
        object.__setattr__(self, "paths", tuple(paths[name] for name in names))

    def balance_basis(self) -> npt.NDArray[np.float64]:
        """Orthonormal ilr basis in clr coordinates, shape (n_coordinates, D) (Egozcue & Pawlowsky-Glahn 2005)."""
        basis = np.zeros((len(self.splits), len(self.parts)))
        for row, split in zip(basis, self.splits, strict=True):
            r, s = len(split.numerator), len(split.denominator)
            row[list(split.numerator)] = np.sqrt(s / (r * (r + s)))
            row[list(split.denominator)] = -np.sqrt(r / (s * (r + s)))
        return basis

    def path_arrays(self) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.float64]]:
        """Paths for compiled loops: split numbers (D, depth), -1 after the end, and their signs (+1 numerator)."""
        depth = max(len(path) for path in self.paths)
        index = np.full((len(self.parts), depth), -1, dtype=np.int64)
        sign = np.zeros((len(self.parts), depth))
        for part, path in enumerate(self.paths):
            for level, (split, in_numerator) in enumerate(path):
                index[part, level] = split
                sign[part, level] = 1.0 if in_numerator else -1.0
        return index, sign


def default_tree(parts: Sequence[str]) -> Tree:
    """The tree used when none is given.

    When all names are among clay, silt, mud, sand and gravel, the fine parts are split from the coarse ones first;
    fine parts then run from the finest, coarse ones from the coarsest, whatever the column order. Other lists
    split each part in turn from those after it.

    Examples
    --------
    >>> default_tree(["mud", "sand", "gravel"])
    ('mud', ('gravel', 'sand'))
    >>> default_tree(["clay", "silt", "sand", "gravel"])
    (('clay', 'silt'), ('gravel', 'sand'))
    >>> default_tree(["a", "b", "c"])
    ('a', ('b', 'c'))
    """
    if not set(parts) <= set(_FINE_TO_COARSE):
        return _chain(parts)
    fine = [p for p in _FINE_TO_COARSE if p in parts and p in _FINE]
    coarse = [p for p in reversed(_FINE_TO_COARSE) if p in parts and p not in _FINE]
    if not fine or not coarse:
        return _chain(fine or coarse)
    return (_chain(fine), _chain(coarse))


def _chain(names: Sequence[str]) -> Tree:
    tree: Tree = names[-1]
    for name in reversed(names[:-1]):
        tree = (name, tree)
    return tree


def _freeze(tree: object) -> Tree:
    if isinstance(tree, str):
        return tree
    if isinstance(tree, Sequence) and len(tree) == 2:
        return (_freeze(tree[0]), _freeze(tree[1]))
    raise CompositionError(f"tree has {tree!r}, expected a part name or a pair of branches, like [a, [b, c]]")


def _leaves(tree: Tree) -> Iterator[str]:
    if isinstance(tree, str):
        yield tree
    else:
        for branch in tree:
            yield from _leaves(branch)


def _walk(
    tree: Tree,
    names: tuple[str, ...],
    path: tuple[tuple[int, bool], ...],
    splits: list[Split],
    paths: dict[str, tuple[tuple[int, bool], ...]],
) -> None:
    if isinstance(tree, str):
        paths[tree] = path
        return
    number = len(splits)
    columns = [tuple(sorted(names.index(leaf) for leaf in _leaves(branch))) for branch in tree]
    splits.append(Split(*columns))
    for branch, in_numerator in zip(tree, (True, False), strict=True):
        _walk(branch, names, (*path, (number, in_numerator)), splits, paths)
