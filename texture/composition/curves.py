"""Grain-size curves: what share is finer than a size, percentiles, graphic and moment statistics, parts.

The cumulative is interpolated in phi, that is in the logarithm of size, as is usual; the same table interpolated in mm has
another median. ``between="monotone"`` is a monotone cubic (PCHIP; Fritsch & Carlson 1980), ``"linear"`` a straight line.

Nothing is invented beyond what was measured: the ends of a curve are either closed (nothing is coarser, or
finer) or open (so much is coarser or finer, of unknown size), and a percentile that falls in an open end is refused.

References
----------
Folk, R.L. & Ward, W.C. (1957). Brazos River bar: a study in the significance of grain size parameters. Journal of
Sedimentary Petrology 27, 3-26.
Fritsch, F.N. & Carlson, R.E. (1980). Monotone piecewise cubic interpolation. SIAM Journal on Numerical Analysis 17, 238-246.
"""

from collections.abc import Callable, Sequence
from typing import Literal, NamedTuple

import numpy as np
import numpy.typing as npt

from texture.composition.closure import Array
from texture.composition.cumulative import SAME_SIZE, Between, check_curve, coarser_at, interpolator, parts_from_weights
from texture.composition.sizes import MUD_SAND_M, SAND_GRAVEL_M, m_from_phi, phi_from_m, to_phi
from texture.composition.statistics import FolkWard, Moments, moments
from texture.errors import CompositionError

__all__ = ["CurveStatistic", "SizeCurve"]


class CurveStatistic(NamedTuple):
    """One line of `SizeCurve.table`."""

    statistic: str
    method: str
    unit: str
    value: float


class SizeCurve:
    """One grain-size curve.

    Parameters
    ----------
    limits_phi : array-like, shape (n + 1,)
        Limits of the size classes, rising or falling. An infinite first or last limit makes that end open: the pan
        under the last sieve, the shells on the first.
    weights : array-like, shape (n,)
        What lies between neighbouring limits, in any one unit.
    between : {"monotone", "linear"}, default "monotone"
        How the cumulative runs between limits.

    Raises
    ------
    CompositionError
        For limits that do not rise or fall, negative or unknown weights, or nothing weighed.

    Examples
    --------
    >>> curve = SizeCurve([-1, 0, 1, 2, 3, 4, float("inf")], [2, 8, 30, 40, 15, 5])
    >>> curve
    SizeCurve(6 classes from -1 to 4 phi, open fine end with 0.05, between='monotone')
    >>> curve.parts().round(3)  # mud, sand, gravel
    array([0.05, 0.95, 0.  ])
    """

    def __init__(self, limits_phi: npt.ArrayLike, weights: npt.ArrayLike, between: Between = "monotone") -> None:
        limits = np.array(limits_phi, dtype=np.float64)
        amounts = np.array(weights, dtype=np.float64)
        limits, amounts = check_curve(limits, amounts, between)
        total = amounts.sum()
        if not total > 0:
            raise CompositionError("size curve: all weights are zero, expected something weighed")
        cumulative = np.concatenate([[0.0], np.cumsum(amounts) / total])
        cumulative[-1] = 1.0
        self.limits_phi, self.weights, self.between = limits, amounts / total, between
        finite = np.isfinite(limits)
        self._phi, self._coarser = limits[finite], cumulative[finite]
        for array in (self.limits_phi, self.weights, self._phi, self._coarser):
            array.flags.writeable = False

    @classmethod
    def from_sizes(
        cls, limits: npt.ArrayLike, weights: npt.ArrayLike, unit: str, between: Between = "monotone"
    ) -> "SizeCurve":
        """A curve from limits in ``mm``, ``um``, ``m`` or ``phi``; 0 and infinity are open ends."""
        sizes = np.array(limits, dtype=np.float64)
        if unit == "phi":
            return cls(sizes, weights, between)
        open_fine = sizes == 0
        phi = np.where(open_fine, np.inf, to_phi(np.where(open_fine, 1.0, sizes), unit))
        return cls(phi, weights, between)

    @classmethod
    def from_cumulative(
        cls,
        sizes: npt.ArrayLike,
        cumulative: npt.ArrayLike,
        unit: str = "phi",
        kind: Literal["passing", "retained"] = "passing",
        between: Between = "monotone",
        total: float = 1.0,
    ) -> "SizeCurve":
        """A curve from cumulative shares passing (finer than) or retained (coarser than) at sizes.

        What is missing to 0 or to `total` at either end becomes an open end.

        Parameters
        ----------
        sizes : array-like, shape (n,)
        cumulative : array-like, shape (n,)
            On the scale of `total`: 1 for fractions, 100 for percent.
        """
        phi = to_phi(sizes, unit)
        shares = np.array(cumulative, dtype=np.float64) / total
        if phi.shape != shares.shape or phi.ndim != 1 or len(phi) < 2:
            raise CompositionError(
                f"size curve: {phi.shape} sizes and {shares.shape} shares, expected two or more pairs"
            )
        order = np.argsort(phi)
        phi, shares = phi[order], shares[order]
        coarser = 1.0 - shares if kind == "passing" else shares
        steps = np.diff(coarser, prepend=0.0, append=1.0)
        # Half a unit in the last of three digits is rounding in the sheet, more is another column.
        if not (np.isfinite(steps).all() and (steps > -5e-4).all()):
            raise CompositionError(
                f"size curve: shares {kind} do not run from 0 to {total:g} in order of size; check `kind` and `total`"
            )
        steps = np.maximum(steps, 0.0)
        limits = np.concatenate([[-np.inf], phi, [np.inf]])
        first, last = int(steps[0] < 1e-12), len(steps) - int(steps[-1] < 1e-12)
        return cls(limits[first : last + 1], steps[first:last], between)

    def __repr__(self) -> str:
        ends = ""
        if self._coarser[0] > 0:
            ends += f", open coarse end with {self._coarser[0]:.3g}"
        if self._coarser[-1] < 1:
            ends += f", open fine end with {1 - self._coarser[-1]:.3g}"
        return (
            f"SizeCurve({len(self.weights)} classes from {self._phi[0]:.4g} to {self._phi[-1]:.4g} phi{ends}, "
            f"between={self.between!r})"
        )

    def finer_than(self, diameter_m: npt.ArrayLike) -> Array:
        """Fraction finer than each diameter.

        Raises
        ------
        CompositionError
            For a size inside an open end.
        """
        phi = phi_from_m(diameter_m)
        return np.asarray(1.0 - coarser_at(self._phi, self._coarser, phi, self.between))

    def percentile_phi(self, percent: npt.ArrayLike) -> Array:
        """Phi at which `percent` of the sample is coarser (cumulated from the coarse end, as Folk & Ward do).

        Where an empty class makes a whole interval right, its middle is given.

        Raises
        ------
        CompositionError
            For a percentile outside 0 to 100 or in an open end.
        """
        asked = np.asarray(percent, dtype=np.float64)
        levels = asked.reshape(-1) / 100.0
        if not ((levels >= 0) & (levels <= 1)).all():
            raise CompositionError(f"percentile {percent!r}, expected 0 to 100")
        outside = (levels < self._coarser[0] - 1e-12) | (levels > self._coarser[-1] + 1e-12)
        if outside.any():
            raise CompositionError(
                f"percentile {100 * levels[outside][0]:g} lies in the open end of the curve: measured is "
                f"{100 * self._coarser[0]:.4g} to {100 * self._coarser[-1]:.4g} %; close the end (`closed`) or ask for another"
            )
        run = interpolator(self._phi, self._coarser, self.between)
        return np.array([self._solve(level, run) for level in levels]).reshape(asked.shape)

    def percentile_m(self, percent: npt.ArrayLike) -> Array:
        """Diameter in metres than which `percent` of the sample is finer: d10, d50, d90."""
        return m_from_phi(self.percentile_phi(100.0 - np.asarray(percent, dtype=np.float64)))

    def parts(self, cuts_m: Sequence[float] = (MUD_SAND_M, SAND_GRAVEL_M)) -> Array:
        """Fractions between cut sizes, finest first; by default mud, sand, gravel.

        Parameters
        ----------
        cuts_m : sequence of float
            Rising diameters in metres.

        Returns
        -------
        fractions : float array, shape (len(cuts_m) + 1,)
            Sum to 1.
        """
        return np.asarray(parts_from_weights(self.limits_phi, self.weights[None], cuts_m, self.between)[0])

    def folk_ward(self) -> FolkWard:
        """Graphic measures of Folk & Ward (1957), in phi."""
        return FolkWard.from_percentiles(self.percentile_phi([5, 16, 25, 50, 75, 84, 95]))

    def moments(self, scale: Literal["phi", "mm"] = "phi") -> Moments:
        """Moment measures about the midpoints of the classes, in phi or (arithmetic) in mm.

        Raises
        ------
        CompositionError
            If an open end holds anything.
        """
        if self._coarser[0] > 0 or self._coarser[-1] < 1:
            raise CompositionError(
                f"{self!r} has an open end, and moments need all sizes; close the end first (`closed`)"
            )
        weights = np.diff(self._coarser)
        edges = self._phi if scale == "phi" else 1e3 * m_from_phi(self._phi)
        return moments(0.5 * (edges[:-1] + edges[1:]), weights, scale)

    def closed(self, coarse_phi: float | None = None, fine_phi: float | None = None) -> "SizeCurve":
        """The same curve with its open ends closed at given sizes: a stated assumption, not a measurement."""
        limits = self.limits_phi.copy()
        for end, phi, infinite in ((0, coarse_phi, -np.inf), (-1, fine_phi, np.inf)):
            if phi is None:
                continue
            if limits[end] != infinite:
                raise CompositionError(f"{self!r}: the {'coarse' if end == 0 else 'fine'} end is closed already")
            limits[end] = phi
        return SizeCurve(limits, self.weights, self.between)

    def joined(self, fine: "SizeCurve", at_phi: float | None = None) -> "SizeCurve":
        """The (sieve) curve down to a size, and another instrument's curve below it.

        The fine curve is scaled to the mass that this one has below the junction; what either measured on the
        other side of it is dropped.

        Parameters
        ----------
        fine : SizeCurve
        at_phi : float, optional
            Where they meet, a limit of this curve; by default the last limit of it that the other has measured too.
        """
        if at_phi is None:
            common = [phi for phi in self._phi if fine._phi[0] <= phi < fine._phi[-1]]
            if not common:
                raise CompositionError(f"{self!r} and {fine!r} have no size in common to be joined at")
            at_phi = float(common[-1])
        place = int(np.argmin(np.abs(self._phi - at_phi)))
        if abs(self._phi[place] - at_phi) > SAME_SIZE:
            raise CompositionError(f"at_phi = {at_phi}, expected a limit of {self!r}")
        passing = 1.0 - self._coarser[place]
        below = 1.0 - float(coarser_at(fine._phi, fine._coarser, np.array(at_phi), fine.between))
        if passing > 0 and below <= 0:
            raise CompositionError(
                f"{fine!r} has nothing finer than {at_phi:g} phi to share out what passed the sieves"
            )
        rest = fine.limits_phi[fine.limits_phi > at_phi + SAME_SIZE]
        inner = 1.0 - coarser_at(fine._phi, fine._coarser, rest[np.isfinite(rest)], fine.between)
        tail = np.concatenate([[below], inner, [0.0] * int(np.isinf(rest[-1]))])
        scale = passing / below if below > 0 else 0.0
        keep = self.limits_phi <= at_phi + SAME_SIZE
        limits = np.concatenate([self.limits_phi[keep], rest])
        return SizeCurve(
            limits, np.concatenate([self.weights[: int(keep.sum()) - 1], -np.diff(tail) * scale]), self.between
        )

    def table(self) -> list[CurveStatistic]:
        """Every statistic that the curve allows, one a line; those that fall in an open end are left out."""
        lines: list[CurveStatistic] = []

        def add(method: str, make: Callable[[], Sequence[tuple[str, str, float]]]) -> None:
            try:
                lines.extend(CurveStatistic(name, method, unit, value) for name, unit, value in make())
            except CompositionError:
                return  # in an open end: not measured

        for percent in (10, 16, 50, 84, 90):
            add("percentile", lambda p=percent: [(f"d{p}", "mm", 1e3 * float(self.percentile_m(p)))])  # type: ignore[misc]
        add("folk_ward", lambda: self.folk_ward().rows())
        add("moments", lambda: self.moments("phi").rows())
        add("moments_arithmetic", lambda: self.moments("mm").rows())
        return lines

    def _solve(self, level: float, run: Callable[[Array], Array]) -> float:
        phi, coarser = self._phi, self._coarser
        low, high = (int(np.searchsorted(coarser, level, side)) for side in ("left", "right"))
        if high > low:  # on one or more limits
            return float(0.5 * (phi[low] + phi[high - 1]))
        if low in (0, len(coarser)):  # a hair outside, by rounding
            return float(phi[min(low, len(phi) - 1)])
        a, b = float(phi[low - 1]), float(phi[low])
        if self.between == "linear":
            return a + (b - a) * float((level - coarser[low - 1]) / (coarser[low] - coarser[low - 1]))
        for _ in range(60):  # the cumulative rises between these limits: halve to the last bit
            middle = 0.5 * (a + b)
            if float(run(np.array(middle))) < level:
                a = middle
            else:
                b = middle
        return 0.5 * (a + b)
