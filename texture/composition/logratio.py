"""Fractions to log-ratio coordinates and back.

Four kinds share one partition (`texture.composition.partition`):

``tree``
    y = ln(sum of one branch / sum of the other) at each split, the multiplicative log-ratio (Aitchison 1986). With
    mud, sand, gravel: ln(mud / (sand + gravel)) and ln(gravel / sand). A row that knows only its mud share informs
    the first coordinate in full.
``ilr``
    orthonormal balances of the same tree: geometric means instead of sums (Egozcue et al. 2003).
``alr``
    ln(part / reference part) (Aitchison 1986).
``shares``
    the tree's shares themselves, untransformed: mud and gravel / (sand + gravel). A control without logarithms.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array, clr_inverse
from texture.composition.coordinate_names import coordinate_name
from texture.composition.partition import Partition, Split, Tree
from texture.composition.rounding import rounding_noise
from texture.composition.sides import closed_rows, mean_sides, refuse_zero_sides, side_total, sum_sides
from texture.errors import CompositionError

__all__ = ["KINDS", "Kind", "LogRatio", "logistic_pair"]

Kind = Literal["tree", "ilr", "alr", "shares"]
KINDS: tuple[Kind, ...] = ("tree", "ilr", "alr", "shares")


@dataclass(frozen=True)
class LogRatio:
    """Log-ratio coordinates of compositions.

    Parameters
    ----------
    parts : sequence of str
        Part names in column order, fine to coarse by custom: mud, sand, gravel.
    kind : {"tree", "ilr", "alr", "shares"}, default "tree"
        See the module's first lines.
    tree : nested pairs of part names, optional
        Who is split from whom; by default ``["mud", ["gravel", "sand"]]`` for mud, sand, gravel
        (`texture.composition.partition.default_tree`). Not used by ``alr``.
    detection_limit : float, default 0.005
        Fractions below it (zeros among them) are replaced by 0.65 × limit; 0 replaces nothing, and a zero is then
        an error. A coordinate whose two sides are both below the limit is NaN. ``shares`` replaces nothing.
    reference : str, optional
        The denominator of ``alr``; the last part by default.

    Examples
    --------
    >>> lr = LogRatio(["mud", "sand", "gravel"])
    >>> lr.coordinate_names
    ('ln(mud / (sand + gravel))', 'ln(gravel / sand)')
    >>> coords = lr.forward([[0.5, 0.4, 0.1], [0.3, float("nan"), float("nan")]])
    >>> coords.round(4)
    array([[ 0.    , -1.3863],
           [-0.8473,     nan]])
    >>> lr.inverse(coords[0]).round(4)
    array([0.5, 0.4, 0.1])
    """

    parts: tuple[str, ...]
    kind: Kind = "tree"
    tree: Tree | None = None
    detection_limit: float = 0.005
    reference: str | None = None

    def __init__(
        self,
        parts: Sequence[str],
        kind: str = "tree",
        tree: object | None = None,
        detection_limit: float = 0.005,
        reference: str | None = None,
    ) -> None:
        if kind not in KINDS:
            raise CompositionError(f"kind = {kind!r}, expected one of {', '.join(KINDS)}")
        partition = Partition(parts, tree)
        if not 0.0 <= detection_limit < 1.0 / len(partition.parts):
            raise CompositionError(
                f"detection_limit = {detection_limit}, expected a fraction from 0 to below "
                f"1/{len(partition.parts)} (one over the number of parts)"
            )
        if reference is not None and (kind != "alr" or reference not in partition.parts):
            raise CompositionError(f"reference = {reference!r}, expected one of the parts, and kind = 'alr'")
        for name, value in (
            ("parts", partition.parts),
            ("kind", kind),
            ("tree", partition.tree if kind != "alr" else None),
            ("detection_limit", float(detection_limit)),
            ("reference", (reference or partition.parts[-1]) if kind == "alr" else None),
            ("partition", partition),
        ):
            object.__setattr__(self, name, value)

    # Not a field: it follows from parts and tree, and would clutter the repr.
    @cached_property
    def partition(self) -> Partition:
        """The checked tree; see `texture.composition.partition.Partition`."""
        return Partition(self.parts, self.tree)

    def __repr__(self) -> str:
        extras = f", tree={self.tree}" if self.tree is not None else f", reference={self.reference!r}"
        return f"LogRatio({list(self.parts)}, kind={self.kind!r}{extras}, detection_limit={self.detection_limit})"

    @property
    def n_parts(self) -> int:
        """Number of parts, D."""
        return len(self.parts)

    @property
    def n_coordinates(self) -> int:
        """Number of coordinates, D - 1."""
        return len(self.parts) - 1

    @cached_property
    def splits(self) -> tuple[Split, ...]:
        """The two sides of each coordinate, as column numbers."""
        if self.kind != "alr":
            return self.partition.splits
        reference = self.parts.index(self.reference or self.parts[-1])
        return tuple(Split((j,), (reference,)) for j in range(self.n_parts) if j != reference)

    @cached_property
    def coordinate_names(self) -> tuple[str, ...]:
        """A formula for each coordinate, such as ``ln(mud / (sand + gravel))``."""
        return tuple(coordinate_name(self.kind, self.parts, split) for split in self.splits)

    @property
    def amalgamates(self) -> bool:
        """Whether sides are sums of parts (tree, shares) rather than products (ilr, alr)."""
        return self.kind in ("tree", "shares")

    @cached_property
    def log_basis(self) -> Array:
        """For ilr and alr: shape (d, D), closed exp(coords @ log_basis) is the composition."""
        if self.kind == "ilr":
            return self.partition.balance_basis()
        if self.kind == "alr":
            basis = np.zeros((self.n_coordinates, self.n_parts))
            for row, split in zip(basis, self.splits, strict=True):
                row[split.numerator[0]] = 1.0
            return basis
        raise CompositionError(f"kind = {self.kind!r} has no linear basis, only ilr and alr have")

    def forward(self, fractions: npt.ArrayLike) -> Array:
        """Coordinates of fractions; NaN only where a coordinate's own parts are unknown.

        Complete rows may be in any one unit (they are closed first). Rows with unknown (NaN) parts must be fractions
        of the whole sample: one side of a split is then also known as 1 minus everything outside it.

        Parameters
        ----------
        fractions : array-like, shape (..., D)
            In the order of `parts`.

        Returns
        -------
        coords : float array, shape (..., D - 1)

        Raises
        ------
        CompositionError
            For negative or infinite parts, a row of zeros, an incomplete row whose known parts exceed 1 by more
            than 0.02, or a zero when `detection_limit` is 0.
        """
        rows, shape = closed_rows(fractions, self.n_parts)
        coords = self._coordinates(self._sides(rows))
        return coords.reshape(*shape, self.n_coordinates)

    def forward_with_noise(
        self, fractions: npt.ArrayLike, resolution: npt.ArrayLike | None = None
    ) -> tuple[Array, Array]:
        """Coordinates and the noise variance that rounding and small parts give them.

        A value known to a step of `resolution` has the standard error σ = resolution / √12 (uniform rounding error).
        To first order (delta method) a log-ratio of two sides has the variance σ² (1 / num² + 1 / den²), with sides
        after replacement of what is below the detection limit. A side of 0.65 × limit with the default resolution
        thus adds (1 / 12) / 0.65² = 0.20, a side of ten limits 0.0008: enough to let a kriging system trust large
        parts more, never so much that a zero says nothing.

        Parameters
        ----------
        fractions : array-like, shape (..., D)
            As for `forward`.
        resolution : float or array-like broadcasting to (...), optional
            Rounding step in fractions of 1 (0.01 for whole percent), one for all or one per row;
            `detection_limit` when left out. The larger of the two is used for a side below the limit.

        Returns
        -------
        coords, noise_variance : float arrays, shape (..., D - 1)
            Variance is NaN where the coordinate is.
        """
        rows, shape = closed_rows(fractions, self.n_parts)
        step = np.asarray(self.detection_limit if resolution is None else resolution, dtype=np.float64)
        if not (np.isfinite(step).all() and (step >= 0).all()):
            raise CompositionError(f"resolution = {resolution!r}, expected finite steps of zero or more")
        step = np.broadcast_to(step, shape).reshape(-1)
        pairs = self._sides(rows)
        coords = self._coordinates(pairs)
        noise = rounding_noise(self, rows, pairs, step)
        out = (*shape, self.n_coordinates)
        return coords.reshape(out), noise.reshape(out)

    def side_totals(self, fractions: npt.ArrayLike) -> list[tuple[Array, Array]]:
        """Sums of both sides of each split in fractions of the whole, before any replacement; NaN where unknown.

        Parameters
        ----------
        fractions : array-like, shape (n, D)
            As for `forward`.

        Returns
        -------
        sides : list of (numerator, denominator), each of shape (n,)
        """
        rows, _ = closed_rows(fractions, self.n_parts)
        return [(side_total(rows, s.numerator), side_total(rows, s.denominator)) for s in self.splits]

    def inverse(self, coords: npt.ArrayLike) -> Array:
        """Fractions of coordinates; rows sum to 1.

        ``shares`` are clipped to [0, 1]. With ``tree`` and ``shares`` a NaN coordinate leaves NaN only in the parts
        below its split (unknown gravel against sand leaves mud known); with ``ilr`` and ``alr`` in the whole row.

        Parameters
        ----------
        coords : array-like, shape (..., D - 1)

        Returns
        -------
        fractions : float array, shape (..., D)
        """
        y = self._coords(coords)
        if not self.amalgamates:
            return clr_inverse(y @ self.log_basis)
        fractions = np.ones((*y.shape[:-1], self.n_parts))
        for i, split in enumerate(self.splits):
            share, rest = self._share_pair(y[..., i])
            for part in split.numerator:
                fractions[..., part] *= share
            for part in split.denominator:
                fractions[..., part] *= rest
        return fractions

    def expected(self, mean: npt.ArrayLike, variance: npt.ArrayLike) -> Array:
        """Expected fractions of normal coordinates: the mean of the back-transform, not the back-transform of the mean.

        See `texture.composition.expected.expected` for methods and measured errors.

        Parameters
        ----------
        mean : array-like, shape (n, d)
        variance : array-like, shape (n, d) or covariance (n, d, d)

        Returns
        -------
        fractions : float array, shape (n, D)
            Rows sum to 1; a row with a NaN anywhere is a NaN row.
        """
        # Compiled, and the compiler takes a third of a second to import: only where it is needed.
        from texture.composition.expected import expected

        return expected(self, mean, variance)

    def quantiles(
        self,
        mean: npt.ArrayLike,
        variance: npt.ArrayLike,
        levels: npt.ArrayLike,
        within: npt.ArrayLike | None = None,
    ) -> Array:
        """Quantiles of each part of normal coordinates.

        See `texture.composition.quantiles.quantiles` for methods and measured errors.

        Parameters
        ----------
        mean : array-like, shape (n, d)
        variance : array-like, shape (n, d) or covariance (n, d, d)
        levels : array-like, shape (q,)
            Probabilities between 0 and 1.
        within : array-like, shape (d,) or (n, d), optional
            The part of the variance that averages out inside a cell: the quantiles are then those of the cell mean.

        Returns
        -------
        fractions : float array, shape (q, n, D)
            Each part on its own: quantiles of different parts do not sum to 1.
        """
        from texture.composition.quantiles import quantiles

        return quantiles(self, mean, variance, levels, within=within)

    # -- inside ------------------------------------------------------------------------------------------------------

    def _sides(self, rows: Array) -> list[tuple[Array, Array]]:
        """Both sides of every split, after replacement; NaN where unknown."""
        if self.kind == "shares":
            return sum_sides(rows, self.splits, 0.0)
        make = sum_sides if self.amalgamates else mean_sides
        pairs = make(rows, self.splits, self.detection_limit)
        if self.detection_limit == 0.0:
            refuse_zero_sides(pairs)
        return pairs

    def _coordinates(self, pairs: list[tuple[Array, Array]]) -> Array:
        if self.kind == "shares":
            return np.column_stack([top / (top + bottom) for top, bottom in pairs])
        logs = np.column_stack([np.log(top / bottom) for top, bottom in pairs])
        if self.kind == "ilr":
            sizes = [(len(s.numerator), len(s.denominator)) for s in self.splits]
            logs *= [np.sqrt(r * s / (r + s)) for r, s in sizes]
        return logs

    def _coords(self, coords: npt.ArrayLike) -> Array:
        y = np.asarray(coords, dtype=np.float64)
        if y.ndim == 0 or y.shape[-1] != self.n_coordinates:
            raise CompositionError(f"coordinates have shape {y.shape}, expected {self.n_coordinates} columns")
        return y

    def _share_pair(self, y: Array) -> tuple[Array, Array]:
        if self.kind == "shares":
            share = np.clip(y, 0.0, 1.0)
            return share, 1.0 - share
        return logistic_pair(y)


def logistic_pair(y: Array) -> tuple[Array, Array]:
    """Logistic of y and of -y, each to full relative precision, without overflow."""
    decay = np.exp(-np.abs(y))
    large = 1.0 / (1.0 + decay)
    small = decay * large
    positive = y >= 0
    return np.where(positive, large, small), np.where(positive, small, large)
