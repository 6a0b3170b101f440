"""What all members say together: mean, spread, quantiles, odds of classes and of limits, cell by cell."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition import class_numbers, find_scheme

if TYPE_CHECKING:
    from texture.members import MemberMaps

__all__ = ["SHOWN", "MemberSummary", "summarise_members"]

Floats = NDArray[np.float64]
SHOWN = 4
"""Members drawn beside the estimate."""


@dataclass(frozen=True, eq=False)
class MemberSummary:
    """Summaries over all cells of the target, NaN outside the water.

    Attributes
    ----------
    count : int
    method : str
        How the prior fields were made.
    mean, sd : float arrays, shape (n, parts)
        sd with the number of members less one; NaN for a single member.
    levels : tuple of float
    quantiles : float array, shape (q, n, parts)
    class_probability : float array, shape (classes, n)
        Share of members in each class of the scheme, in its order.
    above : dict of str to (limits, float array of shape (limits, n))
        Share of members in which a part exceeds each limit.
    shown : float array, shape (up to 4, n, parts)
        The first members themselves.
    """

    count: int
    method: str
    mean: Floats
    sd: Floats
    levels: tuple[float, ...]
    quantiles: Floats
    class_probability: Floats
    above: dict[str, tuple[tuple[float, ...], Floats]]
    shown: Floats

    def line(self) -> str:
        """One line for a person."""
        wet = np.isfinite(self.sd[:, 0])
        spread = f"; mud varies between them by {self.sd[wet, 0].mean():.3f} in a cell" if wet.any() else ""
        return f"  members     {self.count} equally likely beds ({self.method}){spread}"

    def smoother(self, estimate: Floats, edges: NDArray[np.integer]) -> list[float]:
        """How much the estimate changes from cell to neighbour over how much a member does, rms, for each part.

        Parameters
        ----------
        estimate : float array, shape (n, parts)
        edges : int array, shape (m, 2)
            Pairs of neighbouring cells; where there are none, shares are NaN.
        """
        a, b = edges[np.isfinite(self.mean[edges, 0]).all(axis=1)].T

        def change(values: Floats) -> float:
            return float(np.sqrt(np.mean((values[a] - values[b]) ** 2))) if a.size else np.nan

        parts = range(estimate.shape[1])
        members = [np.mean([change(m[:, i]) for m in self.shown]) for i in parts]
        return [change(estimate[:, i]) / float(members[i]) if members[i] > 0.0 else np.nan for i in parts]


def summarise_members(
    maps: MemberMaps,
    parts: Sequence[str],
    levels: tuple[float, ...],
    above: Mapping[str, tuple[float, ...]],
    trace: float,
) -> MemberSummary:
    """Go once through all members, some cells at a time.

    Parameters
    ----------
    maps : MemberMaps
    parts : sequence of str
    levels : tuple of float
        Probabilities of the quantiles.
    above : mapping of part to limits
    trace : float
        Gravel below it names no class.
    """
    n, k, r = maps.n_cells, len(parts), len(maps.numbers)
    scheme = find_scheme("folk")
    mean, sd = np.full((n, k), np.nan), np.full((n, k), np.nan)
    quantiles = np.full((len(levels), n, k), np.nan)
    odds = np.full((len(scheme.numbers), n), np.nan)
    exceeded = {part: np.full((len(limits), n), np.nan) for part, limits in above.items()}
    for cells, block in maps.blocks():
        mean[cells] = block.mean(axis=0)
        sd[cells] = block.std(axis=0, ddof=1) if r > 1 else np.nan
        quantiles[:, cells] = np.quantile(block, levels, axis=0)
        number = class_numbers(block, scheme, trace=trace)
        for i, own in enumerate(scheme.numbers):
            odds[i, cells] = (number == own).mean(axis=0)
        for part, limits in above.items():
            values = block[:, :, list(parts).index(part)]
            exceeded[part][:, cells] = [(values > limit).mean(axis=0) for limit in limits]
    shown = np.stack([maps.fractions(number) for number in maps.numbers[:SHOWN]])
    limits_of = {part: (tuple(above[part]), values) for part, values in exceeded.items()}
    return MemberSummary(r, maps.method, mean, sd, levels, quantiles, odds, limits_of, shown)
