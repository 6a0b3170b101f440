"""Stations that are known by words or by a median alone: held out too, and told of apart, as nothing was measured to score."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Told", "compare_told", "told_rows", "told_text"]

Floats = NDArray[np.float64]
KINDS = {"description": "words", "median_only": "a median"}


@dataclass(frozen=True)
class Told:
    """How held-out predictions of one method compare with what stations of one kind say.

    Attributes
    ----------
    kind : str
        "description" (words) or "median_only".
    n : int
        Stations.
    class_agreement : float
        Share of the described stations whose predicted class is the one that was named; NaN for medians.
    mean_square_standardised_distance : float
        Between prediction and what is said, over both variances, mean over stations and columns; 1 where they agree as
        well as both claim.
    """

    kind: str
    n: int
    class_agreement: float
    mean_square_standardised_distance: float


def compare_told(
    predicted: Floats, described: NDArray[np.str_], median_phi: Floats, square_z: Floats, trace: float
) -> list[Told]:
    """Compare each kind of which there are any stations that were predicted.

    Parameters
    ----------
    predicted : float array, shape (n, parts)
        Held-out fractions; NaN rows are left out.
    described : str array, shape (n,)
        Folk's code of stations known by words, empty elsewhere.
    median_phi : float array, shape (n,)
        Of stations known by their median alone, NaN elsewhere.
    square_z : float array, shape (n, k)
        Squared distance between prediction and station in each column, over the variance of both; NaN where it says nothing.
    trace : float
        Detection limit, for the class.

    Examples
    --------
    >>> sand = np.array([[0.02, 0.98, 0.0], [0.02, 0.98, 0.0]])
    >>> compare_told(sand, np.array(["S", "M"]), np.full(2, np.nan), np.array([[0.5], [9.5]]), 0.001)
    [Told(kind='description', n=2, class_agreement=0.5, mean_square_standardised_distance=5.0)]
    """
    from texture.composition import classify

    there = np.isfinite(predicted).all(axis=1)
    table = []
    for kind, own in (("description", described != ""), ("median_only", np.isfinite(median_phi))):
        rows = np.flatnonzero(own & there)
        if rows.size == 0:
            continue
        share = np.nan
        if kind == "description":
            share = float((classify(predicted[rows], "folk", trace=trace) == described[rows]).mean())
        known = square_z[rows][np.isfinite(square_z[rows])]
        table.append(Told(kind, int(rows.size), share, float(known.mean()) if known.size else np.nan))
    return table


def told_rows(told: Sequence[Told]) -> list[Mapping[str, object]]:
    """Rows of the table of scores: each names the kind of station."""
    return [
        {"stations": t.kind, "part": "all", "score": name, "value": value}
        for t in told
        for name, value in vars(t).items()
        if name != "kind" and np.isfinite(value)
    ]


def told_text(told: Sequence[Told]) -> str:
    """One sentence on stations that are not scored; empty where there are none.

    >>> told_text([Told("description", 40, 0.55, 1.25)])
    'not scored: 40 stations known by words (class as named in 55 %, mean square standardised distance 1.25)'
    """
    said = []
    for t in told:
        named = f"class as named in {100 * t.class_agreement:.0f} %, " if np.isfinite(t.class_agreement) else ""
        far = t.mean_square_standardised_distance
        distance = f"{far:.2f}" if np.isfinite(far) else "not known"
        said.append(
            f"{t.n:,} station{'s' * (t.n != 1)} known by {KINDS[t.kind]} ({named}mean square standardised distance {distance})"
        )
    return "not scored: " + "; ".join(said) if said else ""
