"""The best R² that predictions could attain: repeats at one place differ, and no map can follow that.

A station's value is the mean of its r samples, so it lies off its place's own by a variance s² / r; s² is pooled over the
places with repeats, (Σ (r - 1) sd²) / (Σ (r - 1)). A map that knew every place exactly would still be left with the mean of
these as its mean square error: R² ≤ 1 - mean(s² / r) / variance of what was measured. The places with repeats are taken to
be like the others.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["LEAST_PLACES", "Repeats", "attainable_text", "r_squared_attainable", "repeated_places"]

Floats = NDArray[np.float64]

LEAST_PLACES = 5  # of fewer places the spread is anyone's guess


@dataclass(frozen=True, eq=False)
class Repeats:
    """Repeated samples at the stations.

    Attributes
    ----------
    count : int array, shape (n,)
        Samples that a station is the mean of.
    sd : float array, shape (n, parts), or (n,) of one part
        Standard deviation between them; NaN where there is but one.
    """

    count: NDArray[np.int64]
    sd: Floats

    def of_part(self, part: int) -> Repeats:
        """Those of one part."""
        return Repeats(self.count, self.sd[:, part])


def repeated_places(observed: Floats, repeats: Repeats) -> int:
    """Number of scored stations that have repeats of one part."""
    return int(_repeated(observed, repeats).sum())


def r_squared_attainable(observed: Floats, repeats: Repeats, weights: Floats | None = None) -> Floats:
    """Highest R² of one part that the noise of repeats leaves, shape (w,); 0 at least, NaN with fewer than five places repeated.

    Parameters
    ----------
    observed : float array, shape (n,)
        As measured, the mean of repeats; NaN where not scored.
    repeats : Repeats
        Of this part.
    weights : float array, shape (w, n), optional
        Of the stations; 1 by default. Weights under which nothing was repeated or varies give NaN.

    Examples
    --------
    Five pairs, each with a variance of 0.02 within, beside a variance of 0.083 among the stations:

    >>> pairs = Repeats(np.full(6, 2), np.array([0.02**0.5] * 5 + [np.nan]))
    >>> r_squared_attainable(np.array([0.0, 1.0, 0.5, 0.5, 0.5, 0.5]), pairs).round(3).tolist()
    [0.88]
    """
    w = np.ones((1, len(observed))) if weights is None else weights
    known, repeated = np.isfinite(observed), _repeated(observed, repeats)
    if int(repeated.sum()) < LEAST_PLACES:
        return np.full(len(w), np.nan)
    freedom = w[:, repeated] * (repeats.count[repeated] - 1.0)
    total = w[:, known].sum(axis=1)
    with np.errstate(divide="ignore", invalid="ignore"):
        pooled = freedom @ np.square(repeats.sd[repeated]) / freedom.sum(axis=1)
        noise = pooled * (w[:, known] @ (1.0 / np.maximum(repeats.count[known], 1))) / total
        centre = (w[:, known] @ observed[known]) / total
        variance = (w[:, known] * (observed[known] - centre[:, None]) ** 2).sum(axis=1) / total
        # What rounding leaves of a constant is no variation.
        found = np.where(variance > 1e-24, np.maximum(1.0 - noise / variance, 0.0), np.nan)
    return np.asarray(found)


def attainable_text(parts: Sequence[str], score: Callable[[str, str], float]) -> str:
    """One sentence on what R² could be; `score` gives the value of a part's score by its name."""
    found = [(part, score(part, "r_squared_attainable"), score(part, "repeated_places")) for part in parts]
    if all(np.isnan(best) for _, best, _ in found):
        most = max((int(places) for *_, places in found if np.isfinite(places)), default=0)
        return f"R² attainable given the noise of repeats: not known, {most} of {LEAST_PLACES} places needed were sampled twice or more"
    said = [
        f"{part} {best:.2f}" if np.isfinite(best) else f"{part} not known ({places:.0f} places with repeats)"
        for part, best, places in found
    ]
    return f"R² attainable at best, given how samples of one place differ: {', '.join(said)}"


def _repeated(observed: Floats, repeats: Repeats) -> NDArray[np.bool_]:
    return np.isfinite(observed) & (repeats.count > 1) & np.isfinite(repeats.sd)
