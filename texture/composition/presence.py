"""Zeros as absence: one part is there or not, and how much of it only where it is.

The log-ratio that compares the part with its sibling uses stations that have it; whether it is there at all is an indicator
that is mapped on its own. The expected fraction is probability × share, and what an absent part leaves goes to
its sibling, in proportion where the sibling has several parts.
"""

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.composition.logratio import LogRatio
from texture.errors import CompositionError

__all__ = ["presence_expected", "presence_forward"]


def presence_forward(logratio: LogRatio, fractions: npt.ArrayLike, part: str = "gravel") -> tuple[Array, Array]:
    """Coordinates of the stations that have a part, and whether each has it.

    Parameters
    ----------
    logratio : LogRatio
        Of kind ``tree``.
    fractions : array-like, shape (n, D)
    part : str, default "gravel"

    Returns
    -------
    coords : float array, shape (n, d)
        As `LogRatio.forward`, but NaN in the part's own split where the part is below the detection limit.
    present : float array, shape (n,)
        1, 0, or NaN where the part or its sibling is unknown, or both are below the limit.
    """
    own = _own_split(logratio, part)
    coords = logratio.forward(fractions)
    top, bottom = logratio.side_totals(fractions)[own]
    column = logratio.parts.index(part)
    amount = top if logratio.splits[own].numerator == (column,) else bottom
    present = np.where(np.isnan(coords[:, own]), np.nan, (amount >= logratio.detection_limit).astype(np.float64))
    coords[present == 0, own] = np.nan
    return coords, present


def presence_expected(
    logratio: LogRatio, expected: npt.ArrayLike, probability: npt.ArrayLike, part: str = "gravel"
) -> Array:
    """Expected fractions from those given presence and the probability of presence.

    Parameters
    ----------
    logratio : LogRatio
    expected : array-like, shape (n, D)
        Expected fractions with the part present everywhere (`LogRatio.expected`).
    probability : array-like, shape (n,)
        Values outside [0, 1], as kriged indicators have them, are clipped.

    Returns
    -------
    fractions : float array, shape (n, D)
        Rows sum to what they did.

    Examples
    --------
    >>> lr = LogRatio(["mud", "sand", "gravel"])
    >>> presence_expected(lr, [[0.2, 0.5, 0.3]], [0.5])
    array([[0.2 , 0.65, 0.15]])
    """
    split = logratio.splits[_own_split(logratio, part)]
    fractions = np.array(expected, dtype=np.float64)
    share = np.clip(np.asarray(probability, dtype=np.float64), 0.0, 1.0)
    if fractions.ndim != 2 or fractions.shape[1] != logratio.n_parts or share.shape != fractions.shape[:1]:
        raise CompositionError(
            f"expected fractions have shape {fractions.shape} and probabilities {share.shape}, expected "
            f"(n, {logratio.n_parts}) and (n,)"
        )
    column = logratio.parts.index(part)
    sibling = [j for j in (*split.numerator, *split.denominator) if j != column]
    freed = fractions[:, column] * (1.0 - share)
    whole = fractions[:, sibling].sum(axis=1)
    # With nothing of the sibling to be in proportion to, its parts share alike.
    even = np.full((len(fractions), len(sibling)), 1.0 / len(sibling))
    keys = np.divide(fractions[:, sibling], whole[:, None], out=even, where=whole[:, None] > 0)
    fractions[:, sibling] += freed[:, None] * keys
    fractions[:, column] -= freed
    return fractions


def _own_split(logratio: LogRatio, part: str) -> int:
    """The split one side of which is the part alone."""
    if logratio.kind != "tree":
        raise CompositionError(f"presence works with kind 'tree', not with {logratio.kind!r}")
    if part not in logratio.parts:
        raise CompositionError(f"part = {part!r}, expected one of {', '.join(logratio.parts)}")
    return logratio.partition.paths[logratio.parts.index(part)][-1][0]
