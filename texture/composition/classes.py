"""The texture class of fractions, and the odds of each class. Schemes and their tie rule: `texture.composition.schemes`."""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array, check_parts
from texture.composition.logratio import LogRatio
from texture.composition.schemes import TIE, Scheme, find_scheme
from texture.errors import CompositionError

__all__ = ["ClassOdds", "class_numbers", "class_odds", "classify"]


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
    from texture.composition.draws import normal_draws
    from texture.composition.moments import as_moments, refuse_matrix
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
