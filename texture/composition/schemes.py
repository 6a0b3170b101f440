"""Tables of texture classes: a small set of rules for each scheme.

A table (TOML) lists classes in order; the first whose every condition holds is the class. A condition compares sums of
parts::

    gravel >= 0.30          of the whole
    sand / mud >= 1 / 9     a ratio of two sums
    sand >= silt            two sums
    gravel >= trace         a named limit, which the caller may set

**Ties.** A composition within 1e-9 of a limit is on it, and ``>=`` owns its line: in the tables shipped, the line
belongs to the coarser side, or to the class listed first. So .9/.1, 90/10 and 45/5 are one class, whatever
floating point makes of them.
"""

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from importlib import resources
from typing import Any

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.errors import CompositionError

__all__ = ["TIE", "Scheme", "find_scheme", "scheme_names"]

TIE = 1e-9
"""How near a limit counts as on it, in fractions of the whole."""

MOST_CONDITIONS = 16
"""Different conditions in one table: patterns of them are looked up in a table of 2 ** 16 entries at most."""

_MERGED_FROM = {"mud": ("silt", "clay")}
_CONDITION = re.compile(r"^(?P<left>[^<>=/]+?)(?:/(?P<under>[^<>=/]+?))?(?P<sign>>=|<)(?P<right>[^<>=]+)$")


@dataclass(frozen=True)
class Scheme:
    """A set of texture classes.

    Parameters
    ----------
    title, source : str
        What it is and where it was published.
    parts : tuple of str
        Column order of the fractions it classifies.
    codes, words : tuple of str
        Published short codes, and plain words, class by class in the order of the rules.
    numbers : tuple of int
        Flag numbers from 1, in the same order; 0 is for "no class".
    limits : dict of str to float
        Named limits with their default.
    rules : tuple of tuple of str
        Conditions, tried in order.
    groups : tuple of int
        For each rule the position of its class in `codes`: 0, 1, 2 ... unless the scheme merges another's classes.
    """

    title: str
    source: str
    parts: tuple[str, ...]
    codes: tuple[str, ...]
    words: tuple[str, ...]
    numbers: tuple[int, ...]
    limits: Mapping[str, float]
    rules: tuple[tuple[str, ...], ...]
    groups: tuple[int, ...]

    @classmethod
    def from_table(cls, table: Mapping[str, Any]) -> "Scheme":
        """Build a scheme from a parsed table (see the files in ``texture/composition/tables/classes`` for the form).

        Raises
        ------
        CompositionError
            For missing keys, unknown parts or limits, or a condition that cannot be read.
        """
        try:
            title, source, rows = str(table["title"]), str(table["source"]), list(table["classes"])
            codes = tuple(str(row["code"]) for row in rows)
            words = tuple(str(row["words"]) for row in rows)
            numbers = tuple(int(row["number"]) for row in rows)
            if "base" in table:
                base = find_scheme(str(table["base"]))
                owner = {code: k for k, row in enumerate(rows) for code in row["members"]}
                if sorted(owner) != sorted(base.codes):
                    raise CompositionError(f"class table {title!r}: members are not the classes of {table['base']!r}")
                groups = tuple(owner[code] for code in base.codes)
                parts, limits, rules = base.parts, base.limits, base.rules
            else:
                parts = tuple(str(part) for part in table["parts"])
                limits = {str(k): float(v) for k, v in table.get("limits", {}).items()}
                rules = tuple(tuple(str(c) for c in row["when"]) for row in rows)
                groups = tuple(range(len(rows)))
        except KeyError as missing:
            raise CompositionError(f"class table: the key {missing} is missing") from missing
        if len(set(numbers)) < len(numbers) or min(numbers) < 1 or len(set(codes)) < len(codes):
            raise CompositionError(f"class table {title!r}: expected codes and numbers (from 1) without repeats")
        scheme = cls(title, source, parts, codes, words, numbers, limits, rules, groups)
        scheme.compiled({})  # so that a condition that cannot be read is found here
        return scheme

    def flag_meanings(self) -> tuple[str, ...]:
        """Words joined by underscores, as CF ``flag_meanings`` wants them (it allows no brackets)."""
        return tuple(text.replace(" ", "_").replace("-", "_") for text in self.words)

    def compiled(self, limits: Mapping[str, float]) -> tuple[Array, npt.NDArray[np.int64]]:
        """Conditions as numbers.

        Returns
        -------
        coefficients : float array, shape (n_conditions, n_parts)
            A condition holds where ``parts @ coefficients >= -TIE`` for parts that sum to 1.
        lookup : int array, shape (2 ** n_conditions,)
            Position of the class in `codes` by the pattern of conditions that hold (bit k for condition k), -1 where
            no rule fits.
        """
        unknown = set(limits) - set(self.limits)
        if unknown:
            known = ", ".join(self.limits) or "none"
            raise CompositionError(f"{self.title}: no limit named {', '.join(sorted(unknown))}; it has {known}")
        values = {**self.limits, **limits}
        rows: dict[tuple[float, ...], int] = {}
        needs: list[list[tuple[int, bool]]] = []
        for rule in self.rules:
            read = [self._read(condition, values) for condition in rule]
            needs.append([(rows.setdefault(line, len(rows)), wanted) for line, wanted in read])
        if len(rows) > MOST_CONDITIONS:
            raise CompositionError(f"{self.title}: {len(rows)} different conditions, at most {MOST_CONDITIONS} work")
        patterns = np.arange(2 ** len(rows))
        lookup = np.full(len(patterns), -1, dtype=np.int64)
        # From the last rule to the first, so that the first that fits has the last word.
        for rule_needs, group in zip(reversed(needs), reversed(self.groups), strict=True):
            fits = np.ones(len(patterns), dtype=bool)
            for bit, wanted in rule_needs:
                fits &= ((patterns >> bit) & 1) == wanted
            lookup[fits] = group
        return np.array(list(rows), dtype=np.float64).reshape(len(rows), len(self.parts)), lookup

    def mixing(self, parts: Sequence[str]) -> Array:
        """Matrix, shape (scheme parts, given parts), that sums other parts into this scheme's (mud = silt + clay)."""
        matrix = np.zeros((len(self.parts), len(parts)))
        for row, name in zip(matrix, self.parts, strict=True):
            sources = (name,) if name in parts else _MERGED_FROM.get(name, (name,))
            for source in sources:
                if source not in parts:
                    raise CompositionError(
                        f"{self.title}: needs {', '.join(self.parts)}; found only {', '.join(parts)}"
                    )
                row[list(parts).index(source)] = 1.0
        unused = [part for part, column in zip(parts, matrix.T, strict=True) if not column.any()]
        if unused:
            raise CompositionError(f"{self.title}: has no use for {', '.join(unused)}; leave out or merge these parts")
        return matrix

    def _read(self, condition: str, limits: Mapping[str, float]) -> tuple[tuple[float, ...], bool]:
        match = _CONDITION.match(condition.strip())
        if match is None:
            raise CompositionError(
                f"class table {self.title!r}: cannot read the condition {condition!r}, expected for example "
                "'gravel >= 0.3', 'sand / mud >= 1 / 9' or 'sand >= silt'"
            )
        left, right = self._sum(match["left"]), match["right"].strip()
        under = self._sum(match["under"]) if match["under"] else np.ones(len(self.parts))
        number = limits.get(right, _number(right))
        if number is None:
            if match["under"]:
                raise CompositionError(f"class table {self.title!r}: no limit named {right!r} in {condition!r}")
            coefficients = left - self._sum(right)
        else:
            coefficients = left - number * under
        return tuple(float(c) for c in coefficients), match["sign"] == ">="

    def _sum(self, text: str) -> Array:
        row = np.zeros(len(self.parts))
        for name in text.strip().strip("()").split("+"):
            if name.strip() not in self.parts:
                raise CompositionError(
                    f"class table {self.title!r}: {name.strip()!r} is no part ({', '.join(self.parts)}) or limit"
                )
            row[self.parts.index(name.strip())] = 1.0
        return row


def scheme_names() -> tuple[str, ...]:
    """Names of the schemes that are shipped."""
    folder = resources.files("texture.composition") / "tables" / "classes"
    return tuple(sorted(f.name.removesuffix(".toml") for f in folder.iterdir() if f.name.endswith(".toml")))


@cache
def find_scheme(name: str) -> Scheme:
    """A shipped scheme by name: folk, folk_7, folk_5, folk_ssc, shepard."""
    if name not in scheme_names():
        raise CompositionError(f"scheme = {name!r}, expected one of {', '.join(scheme_names())}, or a Scheme")
    text = (resources.files("texture.composition") / "tables" / "classes" / f"{name}.toml").read_text(encoding="utf-8")
    return Scheme.from_table(tomllib.loads(text))


def _number(text: str) -> float | None:
    try:
        top, _, bottom = text.partition("/")
        return float(top) / float(bottom) if bottom else float(top)
    except ValueError:
        return None
