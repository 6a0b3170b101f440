"""What follows from presence × share: expected fractions, quantiles, class odds and samples by draws.

Whether a part is there is a threshold on a hidden standard normal, present with the given probability (the indicator's
kriged value) and correlated with the coordinates: gravel that lies where mud is scarce is more gravel than the
product of the two means says. The correlation given is that of a 0/1 indicator; that of the hidden normal is larger by
sqrt(p (1 - p)) / density at the threshold (the biserial correlation of Pearson 1909).

Expected fractions integrate the hidden normal out and use draws for the coordinates only. Quantiles of a cell's mean let
the share of the cell that has the part vary: all or nothing where the indicator's variance between cells is p (1 - p), p
itself where it is 0, and in between the share of a cell above a threshold when points inside it are correlated by r; r follows
from the variance by r = sin(π / 2 × variance / (p (1 - p))), which is exact at p = 1/2 (Sheppard 1899).
"""

from functools import cache

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.composition.draws import normal_draws
from texture.composition.logratio import LogRatio
from texture.composition.moments import as_moments, refuse_matrix
from texture.composition.presence_kernels import expected_kernel, odds_kernel, quantile_kernel, sample_kernel
from texture.composition.schemes import TIE, Scheme, find_scheme
from texture.errors import CompositionError

__all__ = ["Presence"]

DRAWS = 512
_LEAST = 1e-6  # probabilities nearer to 0 or 1 are taken as this far from them


class Presence:
    """The distribution of fractions when one part may be absent.

    Parameters
    ----------
    logratio : LogRatio
        Of kind ``tree``.
    part : str
        The part that may be absent; what it leaves goes to the other side of its split, in proportion.

    Examples
    --------
    >>> presence = Presence(LogRatio(["mud", "sand", "gravel"]))
    >>> mean, covariance = np.array([[0.0, 0.0]]), np.zeros((1, 2, 2))
    >>> presence.expected(mean, covariance, [0.5], np.zeros((1, 2))).round(4)
    array([[0.5  , 0.375, 0.125]])
    >>> presence.quantiles(mean, covariance, [0.5], np.zeros((1, 2)), [0.25]).round(4)[:, 0, 2]  # there or not
    array([0.])
    """

    def __init__(self, logratio: LogRatio, part: str = "gravel") -> None:
        if logratio.kind != "tree":
            raise CompositionError(f"presence works with kind 'tree', not with {logratio.kind!r}")
        if part not in logratio.parts:
            raise CompositionError(f"part = {part!r}, expected one of {', '.join(logratio.parts)}")
        self.logratio, self.column = logratio, logratio.parts.index(part)
        split = logratio.splits[logratio.partition.paths[self.column][-1][0]]
        self.sibling = np.array([j for j in (*split.numerator, *split.denominator) if j != self.column], dtype=np.int64)

    def expected(
        self, mean: npt.ArrayLike, covariance: npt.ArrayLike, probability: npt.ArrayLike, correlation: npt.ArrayLike
    ) -> Array:
        """Expected fractions, shape (n, D); rows sum to 1.

        Parameters
        ----------
        mean : array-like, shape (n, d)
            Coordinates with the part present.
        covariance : array-like, shape (n, d, d)
        probability : array-like, shape (n,)
            Of presence; values outside [0, 1], as kriged indicators have them, are clipped.
        correlation : array-like, shape (n, d)
            Of each coordinate with the 0/1 indicator, given what is known at the place.
        """
        m, c, p, r = self._checked(mean, covariance, probability, correlation)
        out = np.full((len(m), self.logratio.n_parts), np.nan)
        status = np.zeros(len(m), dtype=np.bool_)
        index, sign = self.logratio.partition.path_arrays()
        draws = _draws(self.logratio.n_coordinates)
        expected_kernel(m, c, p, r, index, sign, self.column, self.sibling, draws, out, status)
        refuse_matrix(status)
        out /= out.sum(axis=1, keepdims=True)
        return out

    def quantiles(
        self,
        mean: npt.ArrayLike,
        covariance: npt.ArrayLike,
        probability: npt.ArrayLike,
        correlation: npt.ArrayLike,
        levels: npt.ArrayLike,
        within: npt.ArrayLike | None = None,
        between: npt.ArrayLike | None = None,
    ) -> Array:
        """Quantiles of each part, shape (q, n, D).

        Parameters
        ----------
        mean, covariance, probability, correlation
            As for `expected`.
        levels : array-like, shape (q,)
        within : array-like, shape (n, d), optional
            Variance of the coordinates that averages out inside a cell; correlation inside the cell is left out.
        between : array-like, shape (n,), optional
            Variance of the share of a cell that has the part; p (1 - p), all or nothing, when left out.
        """
        m, c, p, r = self._checked(mean, covariance, probability, correlation)
        whole = p * (1.0 - p)
        ratio = np.ones(len(m)) if between is None else np.clip(np.asarray(between) / whole, 0.0, 1.0)
        tie = np.sin(0.5 * np.pi * ratio)
        inside = np.zeros_like(m) if within is None else np.broadcast_to(np.asarray(within, dtype=np.float64), m.shape)
        spread = np.einsum("nii->ni", c)
        kept = np.sqrt(np.clip(1.0 - np.divide(inside, spread, out=np.zeros_like(m), where=spread > 0), 0.0, 1.0))
        outer = np.ascontiguousarray(c * kept[:, :, None] * kept[:, None, :])
        q = np.atleast_1d(np.asarray(levels, dtype=np.float64))
        out = np.full((len(q), len(m), self.logratio.n_parts), np.nan)
        status = np.zeros(len(m), dtype=np.bool_)
        index, sign = self.logratio.partition.path_arrays()
        draws = _draws(self.logratio.n_coordinates)
        inside = np.ascontiguousarray(inside)
        quantile_kernel(m, outer, inside, p, r, tie, index, sign, self.column, self.sibling, draws, q, out, status)
        refuse_matrix(status)
        return out

    def odds(
        self,
        mean: npt.ArrayLike,
        covariance: npt.ArrayLike,
        probability: npt.ArrayLike,
        correlation: npt.ArrayLike,
        scheme: str | Scheme = "folk",
        trace: float | None = None,
    ) -> tuple[npt.NDArray[np.int8], Array]:
        """Most probable texture class at a point and its probability, shapes (n,); arguments as for `expected`."""
        m, c, p, r = self._checked(mean, covariance, probability, correlation)
        chosen = scheme if isinstance(scheme, Scheme) else find_scheme(scheme)
        coefficients, lookup = chosen.compiled({} if trace is None else {"trace": trace})
        coefficients = np.ascontiguousarray(coefficients @ chosen.mixing(self.logratio.parts))
        every = np.zeros((len(m), len(chosen.codes)))
        status = np.zeros(len(m), dtype=np.bool_)
        index, sign = self.logratio.partition.path_arrays()
        draws = _draws(self.logratio.n_coordinates)
        odds_kernel(m, c, p, r, index, sign, self.column, self.sibling, draws, coefficients, lookup, TIE, every, status)
        refuse_matrix(status)
        best = np.argmax(every, axis=1)
        return np.array(chosen.numbers, dtype=np.int8)[best], every[np.arange(len(m)), best]

    def samples(
        self,
        mean: npt.ArrayLike,
        covariance: npt.ArrayLike,
        probability: npt.ArrayLike,
        correlation: npt.ArrayLike,
        normals: Array,
    ) -> Array:
        """Fractions of single samples, shape (n, m, D): the part is in each, or it is not.

        Parameters
        ----------
        mean, covariance, probability, correlation
            As for `expected`.
        normals : float array, shape (m, d + 1)
            Standard normal draws; the last column decides, with the others, whether the part is there.
        """
        m, c, p, r = self._checked(mean, covariance, probability, correlation)
        out = np.full((len(m), len(normals), self.logratio.n_parts), np.nan)
        status = np.zeros(len(m), dtype=np.bool_)
        index, sign = self.logratio.partition.path_arrays()
        draws = np.ascontiguousarray(normals, dtype=np.float64)
        sample_kernel(m, c, p, r, index, sign, self.column, self.sibling, draws, out, status)
        refuse_matrix(status)
        return out

    def _checked(
        self, mean: npt.ArrayLike, covariance: npt.ArrayLike, probability: npt.ArrayLike, correlation: npt.ArrayLike
    ) -> tuple[Array, Array, Array, Array]:
        m, c, correlated = as_moments(self.logratio, mean, covariance)
        if not correlated:
            c = c[:, :, None] * np.eye(m.shape[1])
        p = np.clip(np.asarray(probability, dtype=np.float64), _LEAST, 1.0 - _LEAST)
        r = np.ascontiguousarray(correlation, dtype=np.float64)
        if p.shape != m.shape[:1] or r.shape != m.shape:
            raise CompositionError(
                f"probabilities have shape {p.shape} and correlations {r.shape}, expected {m.shape[:1]} and {m.shape}"
            )
        return m, c, p, r


@cache
def _draws(d: int) -> Array:
    """Draws of the coordinates and, in the last column, of the hidden normal."""
    return normal_draws(d + 1, DRAWS)
