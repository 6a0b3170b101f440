"""Texture classes: a small table of rules for each scheme, and the class of any fractions.

A table lists classes in order; the first whose every condition holds is the class. A condition compares sums of parts::

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
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array, check_parts
from texture.composition.logratio import LogRatio
from texture.errors import CompositionError

__all__ = ["ClassOdds", "Scheme", "class_numbers", "class_odds", "classify", "find_scheme", "scheme_names"]

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


class ClassOdds(NamedTuple):
    """Probabilities of texture classes, from `class_odds`.

    Attributes
    ----------
    number : int8 array, shape (n,)
        The most probable class (the scheme's flag number), 0 where unknown.
    probability : float array, shape (n,)
        Of that class; NaN where unknown.
    all : float array, shape (n, n_classes)
        Of every class, in the order of the scheme's codes; rows sum to 1.
    """

    number: npt.NDArray[np.int8]
    probability: Array
    all: Array


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


def classify(
    fractions: npt.ArrayLike,
    scheme: str | Scheme = "folk",
    *,
    trace: float | None = None,
    parts: Sequence[str] | None = None,
) -> npt.NDArray[np.str_]:
    """Texture class of each row, as its published short code.

    Parameters
    ----------
    fractions : array-like, shape (..., D)
        In any one unit; columns in the order of the scheme's parts: mud, sand, gravel for ``folk`` and its groups;
        sand, silt, clay for ``folk_ssc`` and ``shepard``. A row with a NaN has no class: an empty code.
    scheme : str or Scheme, default "folk"
        Folk (1954) for gravel, sand, mud.
    trace : float, optional
        The gravel fraction from which a class is "slightly gravelly"; 0.0001 in Folk's text, 0.01 in some mapping.
    parts : sequence of str, optional
        Names of the columns where they are others than the scheme's; silt and clay are summed to mud.

    Returns
    -------
    codes : str array, shape (...)

    Raises
    ------
    CompositionError
        For an unknown scheme, negative or infinite fractions, or a row of zeros.

    Examples
    --------
    >>> classify([[19.5, 80, 0.5], [0.02, 0.58, 0.40]])
    array(['(g)mS', 'sG'], dtype='<U5')
    >>> classify([19.5, 80, 0.5], trace=0.01)
    array('mS', dtype='<U5')
    """
    chosen = scheme if isinstance(scheme, Scheme) else find_scheme(scheme)
    positions, shape = _positions(chosen, fractions, trace, parts)
    return np.array(["", *chosen.codes])[positions + 1].reshape(shape)


def class_numbers(
    fractions: npt.ArrayLike,
    scheme: str | Scheme = "folk",
    *,
    trace: float | None = None,
    parts: Sequence[str] | None = None,
) -> npt.NDArray[np.int8]:
    """Texture class of each row as the scheme's flag number, 0 where unknown; arguments as for `classify`."""
    chosen = scheme if isinstance(scheme, Scheme) else find_scheme(scheme)
    positions, shape = _positions(chosen, fractions, trace, parts)
    return np.array([0, *chosen.numbers], dtype=np.int8)[positions + 1].reshape(shape)


def class_odds(
    logratio: LogRatio,
    mean: npt.ArrayLike,
    variance: npt.ArrayLike,
    scheme: str | Scheme = "folk",
    *,
    trace: float | None = None,
    draws: int = 512,
) -> ClassOdds:
    """Probability of each texture class when the log-ratio coordinates are normal.

    Parameters
    ----------
    logratio : LogRatio
        Its parts are matched with the scheme's by name; silt and clay are summed to mud.
    mean : array-like, shape (n, d)
    variance : array-like, shape (n, d) or (n, d, d)
    scheme, trace
        As for `classify`. A trace below the detection limit finds gravel everywhere: use at least the limit.
    draws : int, default 512
        Scrambled Sobol normal draws, a power of two. At 512, the largest error of a probability measured over 200 random
        means and covariances of three parts was 0.011, the root mean square 0.0022.

    Returns
    -------
    odds : ClassOdds

    Raises
    ------
    CompositionError
        As for `LogRatio.expected` and `classify`.
    """
    # Compiled: imported only where it is needed.
    from texture.composition.expected import as_moments, normal_draws, refuse_matrix
    from texture.composition.odds import odds_kernel

    chosen = scheme if isinstance(scheme, Scheme) else find_scheme(scheme)
    m, v, correlated = as_moments(logratio, mean, variance)
    covariance = v if correlated else v[:, :, None] * np.eye(m.shape[1])
    coefficients, lookup = chosen.compiled({} if trace is None else {"trace": trace})
    index, sign = logratio.partition.path_arrays()
    basis = np.zeros((0, 0)) if logratio.amalgamates else logratio.log_basis
    every = np.zeros((len(m), len(chosen.codes)))
    status = np.zeros(len(m), dtype=np.bool_)
    odds_kernel(
        m,
        covariance,
        index,
        sign,
        basis,
        logratio.kind == "shares",
        np.ascontiguousarray(coefficients @ chosen.mixing(logratio.parts)),
        lookup,
        normal_draws(logratio.n_coordinates, draws),
        TIE,
        every,
        status,
    )
    refuse_matrix(status)
    known = ~np.isnan(every[:, 0])
    best = np.argmax(np.where(known[:, None], every, 0.0), axis=1)
    number = np.where(known, np.array(chosen.numbers, dtype=np.int8)[best], np.int8(0))
    return ClassOdds(number, every[np.arange(len(m)), best], every)


def _positions(
    scheme: Scheme, fractions: npt.ArrayLike, trace: float | None, names: Sequence[str] | None
) -> tuple[npt.NDArray[np.int64], tuple[int, ...]]:
    """Position of each row's class in the scheme's codes, -1 where unknown, and the leading shape."""
    columns = scheme.parts if names is None else tuple(names)
    array = check_parts(fractions, n_parts=len(columns))
    rows = array.reshape(-1, len(columns))
    totals = rows.sum(axis=1)
    if (totals == 0).any():
        row = int(np.argmax(totals == 0))
        raise CompositionError(f"row {row} (counted from 0): all parts are zero, expected one above zero")
    coefficients, lookup = scheme.compiled({} if trace is None else {"trace": trace})
    coefficients = coefficients @ scheme.mixing(columns)
    slack = -TIE * totals
    pattern = np.zeros(len(rows), dtype=np.int32)
    for bit, line in enumerate(coefficients):
        pattern |= (_dot(rows, line) >= slack).astype(np.int32) << bit
    positions = lookup[pattern]
    unknown = np.isnan(totals)
    positions[unknown] = -1
    if (positions[~unknown] < 0).any():
        row = int(np.flatnonzero((positions < 0) & ~unknown)[0])
        raise CompositionError(f"row {row} (counted from 0): no class of {scheme.title!r} takes {rows[row].tolist()}")
    return positions, array.shape[:-1]


def _dot(rows: Array, line: Array) -> Array:
    """Sum of columns by coefficients, column by column: the same bits whatever the number of rows."""
    total = rows[:, 0] * line[0]
    for j in range(1, rows.shape[1]):
        if line[j]:
            total = total + rows[:, j] * line[j]
    return np.asarray(total)


def _number(text: str) -> float | None:
    try:
        top, _, bottom = text.partition("/")
        return float(top) / float(bottom) if bottom else float(top)
    except ValueError:
        return None
