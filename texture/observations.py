"""From stations to arrays: points in the plane, and what each station says of the parts."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.composition import calibrate_words, class_moments, from_intervals, from_median, from_mud_and_sand
from texture.errors import SampleError

if TYPE_CHECKING:
    import pandas as pd

    from texture.composition import LogRatio
    from texture.composition.calibrated import Calibrated
    from texture.stations import Stations
    from texture.structure.plane import Plane

__all__ = ["Observations", "observe"]

Floats = NDArray[np.float64]
LEAST_STATIONS = 5  # fewer cannot show any spatial structure, nor be held out and still fit
WIDEST_SCORED = 0.02  # a fraction known no better than this is no measurement to score a prediction against


@dataclass(frozen=True, eq=False)
class Observations:
    """What the stations say, as arrays with one row per station; nothing in it depends on coordinates or limits.

    Attributes
    ----------
    points : float array, shape (n, 2)
        Metres in the working plane.
    fractions : float array, shape (n, parts)
        As measured, NaN where unknown: for rows in words, where only mud : sand is known, and where limits further
        apart than 0.02 are all there is.
    step : float array, shape (n,)
        Rounding step of the fractions.
    low, high : float arrays, shape (n, parts)
        Limits of rows that are not exact, such as `<1` or `40-60`; NaN for all other rows.
    described : str array, shape (n,)
        Folk's code of rows told only in words, empty elsewhere.
    mud_of_fines : float array, shape (n,)
        Mud / (mud + sand) of rows that know nothing else; NaN elsewhere.
    survey : int array, shape (n,)
        Number of the survey of each station.
    measured : bool array, shape (n,)
        True where fractions were measured rather than described in words; only these are scored.
    rows : int array, shape (n,)
        Row of the stations table.
    median_phi : float array, shape (n,)
        Median grain size of rows that know nothing else; NaN elsewhere.
    accuracy_m : float array, shape (n,)
        How far each position may be off in either direction; 0 where nothing says.
    repeats : int array, shape (n,)
        Samples that the fractions are the mean of.
    repeat_sd : float array, shape (n, parts)
        Standard deviation between them; NaN where there is but one.
    """

    points: Floats
    fractions: Floats
    step: Floats
    low: Floats
    high: Floats
    described: NDArray[np.str_]
    mud_of_fines: Floats
    survey: NDArray[np.int64]
    measured: NDArray[np.bool_]
    rows: NDArray[np.int64]
    median_phi: Floats
    accuracy_m: Floats
    repeats: NDArray[np.int64]
    repeat_sd: Floats

    @property
    def count(self) -> int:
        """Number of stations."""
        return int(self.points.shape[0])

    @property
    def bounded(self) -> NDArray[np.bool_]:
        """Rows that are known only by limits, shape (n,)."""
        return np.asarray(np.isfinite(self.low).any(axis=1))

    @property
    def exact(self) -> NDArray[np.bool_]:
        """Rows whose fractions are numbers, though some may be unknown, shape (n,)."""
        numbers = np.isnan(self.mud_of_fines) & np.isnan(self.median_phi)
        return np.asarray((self.described == "") & numbers & ~self.bounded)

    def take(self, index: NDArray[np.int64]) -> Observations:
        """Return the observations of some stations."""
        return replace(self, **{name: getattr(self, name)[index] for name in self.__dataclass_fields__})

    def coordinates(self, logratio: LogRatio) -> tuple[Floats, Floats]:
        """Coordinates of every station, and the variance of each beside the bed's own.

        Exact rows become coordinates directly, limits and words by the spread of what they allow (words calibrated on exact rows beside
        them where there are enough), and rows that only
        know mud : sand by what the exact rows among these observations say of gravel.

        Parameters
        ----------
        logratio : LogRatio
            Its kind, and the limit below which parts are replaced.

        Returns
        -------
        coordinates : float array, shape (n, d)
            NaN where the row says nothing of one.
        noise : float array, shape (n, d)
            Rounding and small parts, words, limits, unseen gravel; 0 where the coordinate is NaN.
        """
        values = np.full((self.count, logratio.n_coordinates), np.nan)
        noise = values.copy()
        exact, bounded, words = self.exact, self.bounded, self.described != ""
        values[exact], noise[exact] = logratio.forward_with_noise(self.fractions[exact], self.step[exact])
        if bounded.any():
            values[bounded], noise[bounded] = from_intervals(logratio, self.low[bounded], self.high[bounded])
        if words.any():
            values[words], noise[words], _ = self._words(logratio, values)
        fines = np.isfinite(self.mud_of_fines)
        if fines.any():
            known = _gravel_logit(self.fractions[exact, 2], logratio.detection_limit)
            values[fines], noise[fines] = from_mud_and_sand(logratio, self.mud_of_fines[fines], known)
        medians = np.isfinite(self.median_phi)
        if medians.any():
            values[medians], noise[medians] = from_median(logratio, self.median_phi[medians])
        return values, np.nan_to_num(noise)

    def calibrated_words(self, logratio: LogRatio) -> list[Calibrated]:
        """Classes whose centre and spread were moved by measured samples beside the described stations."""
        return self._words(logratio, self.coordinates(logratio)[0])[2] if (self.described != "").any() else []

    def _words(self, logratio: LogRatio, values: Floats) -> tuple[Floats, Floats, list[Calibrated]]:
        words, exact = self.described != "", self.exact
        mean, variance = _from_words(self.described[words], logratio)
        return calibrate_words(
            self.described[words], self.points[words], mean, variance, self.points[exact], values[exact]
        )


def observe(stations: Stations, logratio: LogRatio, plane: Plane) -> Observations:
    """Turn stations into arrays; rows that are evidence of hard ground, or inform no coordinate, are not part of them.

    Raises
    ------
    SampleError
        If fewer than five stations inform any coordinate.
    """
    table = stations.samples
    parts = list(logratio.parts)
    fractions = np.array(table[parts], dtype=np.float64)  # a copy: some of it is blanked below
    words = (table["kind"] == "description").to_numpy()
    medians = (table["kind"] == "median_only").to_numpy()
    low, high = _limits(table, parts)
    bounded = np.isfinite(low).any(axis=1)
    fractions[bounded] = np.where((high - low)[bounded] <= WIDEST_SCORED, 0.5 * (low + high)[bounded], np.nan)
    fines = np.isfinite(fractions[:, :2]).all(axis=1) & np.isnan(fractions[:, 2]) & ~words & ~bounded
    mud_of_fines = np.full(len(table), np.nan)
    mud_of_fines[fines] = fractions[fines, 0] / fractions[fines, :2].sum(axis=1)
    fractions[fines] = np.nan  # shares of what passed 2 mm are not shares of the whole: not to be scored
    names = sorted(table["survey"].unique())
    said = Observations(
        points=plane.to_metres(table["longitude"].to_numpy(), table["latitude"].to_numpy()),
        fractions=fractions,
        step=2.0 * table["resolution"].fillna(0.0).to_numpy(dtype=np.float64),  # the table holds half a step
        low=low,
        high=high,
        described=np.where(words, table["described_class"].to_numpy(dtype=np.str_), ""),
        mud_of_fines=mud_of_fines,
        median_phi=np.where(medians, table["median_phi"].to_numpy(dtype=np.float64), np.nan),
        survey=table["survey"].map({name: i for i, name in enumerate(names)}).to_numpy(dtype=np.int64),
        measured=~words & ~medians,
        rows=table.index.to_numpy(dtype=np.int64),
        accuracy_m=table["position_accuracy_m"].fillna(0.0).to_numpy(dtype=np.float64),
        repeats=table["repeats"].to_numpy(dtype=np.int64),
        repeat_sd=table[[f"repeat_sd_{part}" for part in parts]].to_numpy(dtype=np.float64),
    )
    informs = np.isfinite(said.coordinates(logratio)[0]).any(axis=1)
    if int(informs.sum()) < LEAST_STATIONS:
        raise SampleError(
            f"{int(informs.sum())} usable stations were left of {len(table)}, expected at least {LEAST_STATIONS}; "
            "see what was set aside with: texture intake"
        )
    return said.take(np.flatnonzero(informs))


def _limits(table: pd.DataFrame, parts: list[str]) -> tuple[Floats, Floats]:
    """Limits of the rows that have any part between two different ones; NaN rows elsewhere.

    The columns `<part>_low` and `<part>_high` are there only where a spreadsheet told of limits; a blank one is an
    exact part, or an unknown one.
    """
    value = np.array(table[parts], dtype=np.float64)
    low, high = value.copy(), value.copy()
    for i, part in enumerate(parts):
        for limits, name in ((low, f"{part}_low"), (high, f"{part}_high")):
            if name in table.columns:
                given = table[name].to_numpy(dtype=np.float64)
                limits[:, i] = np.where(np.isfinite(given), given, limits[:, i])
    inexact = np.asarray(((high - low) > 1e-9).any(axis=1))  # closer than that they are one number
    low, high = np.where(np.isnan(low), 0.0, low), np.where(np.isnan(high), 1.0, high)
    nothing = ~inexact[:, None]
    return np.where(nothing, np.nan, low), np.where(nothing, np.nan, high)


def _from_words(codes: NDArray[np.str_], logratio: LogRatio) -> tuple[Floats, Floats]:
    """Moments of described classes; as shares where the coordinates are shares.

    What a describer adds to the spread of a class is a variance of log-ratios, so shares go through those.
    """
    if logratio.kind != "shares":
        mean, covariance = class_moments(codes.tolist(), logratio)
        return mean, np.einsum("nii->ni", covariance)
    mean, covariance = class_moments(codes.tolist(), replace(logratio, kind="tree"))
    z, weight = np.polynomial.hermite_e.hermegauss(16)  # a logistic of a normal this wide: to 1e-4
    weight = weight / weight.sum()
    spread = np.sqrt(np.einsum("nii->ni", covariance))
    shares = 1.0 / (1.0 + np.exp(-(mean[..., None] + spread[..., None] * z)))
    centre = shares @ weight
    return centre, (shares - centre[..., None]) ** 2 @ weight


def _gravel_logit(gravel: Floats, limit: float) -> tuple[float, float] | None:
    """Mean and variance of logit gravel over measured rows; None where there are too few to say."""
    gravel = gravel[np.isfinite(gravel)]
    if gravel.size < LEAST_STATIONS:
        return None
    gravel = np.clip(gravel, 0.65 * limit, 1.0 - 0.65 * limit)
    logit = np.log(gravel / (1.0 - gravel))
    return float(logit.mean()), float(logit.var(ddof=1))
