"""From held-out normals in columns to scored compositions: calibration, intervals, draws and every score."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.validation.agreement import class_agreement
from texture.validation.attainable import Repeats
from texture.validation.calibration import calibration_factors, out_of_fold_factors
from texture.validation.columns import Columns
from texture.validation.ensemble import DrawScores, score_draws
from texture.validation.held_out import HeldOut, ScoreWeights, score_table
from texture.validation.spread import out_of_fold_spread, residual_spread
from texture.validation.told import compare_told

if TYPE_CHECKING:
    from texture.learning import Learned
    from texture.treatments import Treatment

__all__ = ["Judge", "Judged"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

DRAWS = 256
"""Draws of each held-out sample: on the demo the energy score moves by 2e-4 of itself between 256 and 4096."""
AT_ONCE = 2_000  # stations whose draws are held in memory together


@dataclass(frozen=True, eq=False)
class Judged:
    """A method's held-out predictions, and what of its uncertainty was learned from them.

    Attributes
    ----------
    held_out : HeldOut
    factors : float array, shape (k,), or None
        Calibration of each column from all folds; None for a method without a variance.
    error : (variance (k,), correlation (k, k)) or None
        Spread of a method without a variance, from all its held-out errors.
    before : DrawScores
        As `held_out.draws`, without the factors.
    columns : Columns
        As predicted, not calibrated.
    settings : mapping
        What the method is to be made with for the map.
    """

    held_out: HeldOut
    factors: Floats | None
    error: tuple[Floats, Floats] | None
    before: DrawScores
    columns: Columns
    settings: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class Judge:
    """What all methods are judged by.

    Attributes
    ----------
    parts : tuple of str
    observed : float array, shape (n, parts)
        Measured fractions, NaN where unknown or not to be scored.
    labels : int array, shape (n,)
        Folds.
    weights : ScoreWeights
    limit : float
        Detection limit.
    median : bool
        Whether the map back-transforms coordinates instead of taking expected fractions; what is scored then does so too.
    repeats : Repeats, optional
        Of the stations.
    """

    parts: tuple[str, ...]
    observed: Floats
    labels: Ints
    weights: ScoreWeights
    limit: float
    median: bool = False
    repeats: Repeats | None = None

    def judge(self, name: str, learned: Learned, columns: Columns, integrates: bool) -> Judged:
        """Calibrate, transform to fractions, and score; skill over controls comes with `compare`.

        Parameters
        ----------
        name : str
        learned : Learned
            The treatment, and the stations in its columns.
        columns : Columns
        integrates : bool
            Whether the method has a variance; its expected fractions then integrate over it. Otherwise each station gets the
            spread of the errors in the other folds, and the prediction itself is transformed as it is.
        """
        treatment = learned.treatment
        low, high = treatment.bounds(learned.observations)
        scored = np.asarray(np.isfinite(self.observed).any(axis=1))[:, None]
        low, high = np.where(scored, low, np.nan), np.where(scored, high, np.nan)
        factors, error = None, None
        if integrates:
            variance = columns.sample_variance
            factors = calibration_factors(columns.mean, variance, low, high)
            wide = columns.scaled(out_of_fold_factors(columns.mean, variance, low, high, self.labels))
            before = self._draws(treatment, columns) if (factors != 1.0).any() else None
            predicted = (
                treatment.back(wide.mean)
                if self.median
                else treatment.expected(wide.mean, wide.covariance(wide.variance))
            )
        else:
            errors = np.where(scored, learned.values - columns.mean, np.nan)
            error = residual_spread(errors)
            variance, correlation = out_of_fold_spread(errors, self.labels)
            wide = Columns(columns.mean, variance, np.zeros_like(variance), correlation)
            before, predicted = None, treatment.back(columns.mean)
        draws = self._draws(treatment, wide)
        spread = wide.covariance(wide.sample_variance)
        q = treatment.sample_quantiles(wide.mean, spread, (0.05, 0.25, 0.75, 0.95))
        exact = np.where(low == high, low, np.nan)
        with np.errstate(divide="ignore", invalid="ignore"):
            z2 = (exact - wide.mean) ** 2 / wide.sample_variance
            # A method without a variance has its errors at measured stations for one: what words leave open comes on top.
            own = learned.noise if not integrates else 0.0
            told = (learned.values - wide.mean) ** 2 / (wide.sample_variance + own)
        said = learned.observations
        held = HeldOut(
            name,
            predicted,
            {0.5: (q[1], q[2]), 0.9: (q[0], q[3])},
            draws,
            class_agreement(self.observed, predicted, "folk", self.limit),
            square_z={
                c: np.where(np.isfinite(z2[:, j]), z2[:, j], np.nan) for j, c in enumerate(treatment.column_names)
            },
            told=compare_told(predicted, said.described, said.median_phi, told, self.limit),
        )
        return Judged(held, factors, error, before or draws, columns)

    def compare(self, judged: Judged, controls: dict[str, Floats]) -> Judged:
        """Add the table of scores, with skill over the controls' predictions."""
        held = judged.held_out
        others = {name: predicted for name, predicted in controls.items() if name != held.method}
        table = score_table(self.parts, self.observed, held, self.weights, self.limit, others, self.repeats)
        return replace(judged, held_out=replace(held, scores=table))

    def _draws(self, treatment: Treatment, columns: Columns) -> DrawScores:
        from texture.composition.draws import normal_draws

        normals = normal_draws(columns.mean.shape[1], DRAWS)
        covariance = columns.covariance(columns.sample_variance)
        found = []
        for start in range(0, len(columns.mean), AT_ONCE):
            some = slice(start, start + AT_ONCE)
            samples = treatment.samples(columns.mean[some], covariance[some], normals)
            found.append(score_draws(samples, self.observed[some], self.limit))
        return DrawScores(
            *(np.concatenate([getattr(f, name) for f in found]) for name in DrawScores.__dataclass_fields__)
        )
