"""Everything that is known of one method after its stations were held out, and the table of its scores."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from texture.validation.agreement import Agreement
from texture.validation.attainable import Repeats, r_squared_attainable, repeated_places
from texture.validation.ensemble import DrawScores
from texture.validation.scores import aitchison_distance, part_scores, weighted_mean
from texture.validation.told import Told

__all__ = ["HeldOut", "Score", "ScoreWeights", "score_table"]

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Score:
    """One score of one part ("all" for the composition, a formula for a column).

    Attributes
    ----------
    part, score : str
    value : float
        NaN where it could not be made.
    low, high : float
        Ends of its 90 % interval by the block bootstrap; NaN where there were too few blocks.
    map_weighted : float
        The same score with stations weighted by the share of the map that each is nearest to.
    """

    part: str
    score: str
    value: float
    low: float = np.nan
    high: float = np.nan
    map_weighted: float = np.nan


@dataclass(frozen=True, eq=False)
class ScoreWeights:
    """Weights of the stations that scores are made with.

    Attributes
    ----------
    of_map : float array, shape (n,)
        Share of the map that each station is nearest to.
    resamples : float array, shape (b, n)
        How often each station stands in each resample; may be empty, (0, n).
    """

    of_map: Floats
    resamples: Floats

    @property
    def rows(self) -> Floats:
        """Plain weights, those of the map, and every resample, shape (2 + b, n)."""
        return np.vstack([np.ones(len(self.of_map)), self.of_map, self.resamples])


@dataclass(frozen=True, eq=False)
class HeldOut:
    """Held-out predictions of one method.

    Attributes
    ----------
    method : str
    predicted : float array, shape (n, parts)
        Expected fractions of each station when it was held out.
    intervals : mapping of float to (low, high), each of shape (n, parts)
        Central intervals of a sample, by the share they are meant to hold; after calibration.
    draws : DrawScores
        Scores of each station's predicted distribution.
    agreement : Agreement
        Texture classes measured and predicted.
    scores : list of Score
    square_z : mapping of str to float array, shape (n,)
        Squared standardised error of each column, by its formula; NaN where unknown.
    told : list of Told
        Stations known by words or a median, which no score counts.
    """

    method: str
    predicted: Floats
    intervals: Mapping[float, tuple[Floats, Floats]]
    draws: DrawScores
    agreement: Agreement
    scores: list[Score] = field(default_factory=list)
    square_z: Mapping[str, Floats] = field(default_factory=dict)
    told: list[Told] = field(default_factory=list)

    @property
    def low(self) -> Floats:
        """Lower end of the 90 % interval, shape (n, parts)."""
        return self.intervals[0.9][0]

    @property
    def high(self) -> Floats:
        """Upper end of the 90 % interval, shape (n, parts)."""
        return self.intervals[0.9][1]

    def find(self, part: str, name: str) -> Score:
        """Return one score with its interval; of NaN where it was not made."""
        return next((s for s in self.scores if s.part == part and s.score == name), Score(part, name, np.nan))

    def score(self, part: str, name: str) -> float:
        """Return the value of one score, NaN where it was not made."""
        return self.find(part, name).value

    def __repr__(self) -> str:
        rmse = {s.part: s.value for s in self.scores if s.score == "rmse"}
        return f"<HeldOut {self.method}: RMSE {', '.join(f'{part} {value:.3f}' for part, value in rmse.items())}>"


def score_table(
    parts: Sequence[str],
    observed: Floats,
    held: HeldOut,
    weights: ScoreWeights,
    limit: float,
    controls: Mapping[str, Floats] | None = None,
    repeats: Repeats | None = None,
) -> list[Score]:
    """Score every part and the composition.

    Parameters
    ----------
    parts : sequence of str
    observed : float array, shape (n, parts)
        NaN where unknown or not to be scored.
    held : HeldOut
        Its `scores` are not looked at.
    weights : ScoreWeights
    limit : float
        Detection limit: the floor of the Aitchison distance, and the level below which an interval reaches down to zero.
    controls : mapping of str to float array, shape (n, parts)
        Predictions of methods that skill is measured over.
    repeats : Repeats, optional
        What R² is attainable at best follows from them.
    """
    rows = weights.rows
    table: list[Score] = []

    def add(part: str, name: str, values: Floats) -> None:
        value, of_map, resampled = float(values[0]), float(values[1]), values[2:]
        if name == "n":
            table.append(Score(part, name, value, map_weighted=value))
            return
        resampled = resampled[np.isfinite(resampled)]
        low, high = np.quantile(resampled, [0.05, 0.95]) if resampled.size else (np.nan, np.nan)
        table.append(Score(part, name, value, float(low), float(high), of_map))

    for i, part in enumerate(parts):
        intervals = {share: (low[:, i], high[:, i]) for share, (low, high) in held.intervals.items()}
        pit = held.draws.pit_low[:, i], held.draws.pit_high[:, i]
        others = {name: other[:, i] for name, other in (controls or {}).items()}
        found = part_scores(
            observed[:, i], held.predicted[:, i], rows, intervals, held.draws.crps[:, i], pit, limit, others
        )
        for name, values in found.items():
            add(part, name, values)
        if repeats is not None:
            known = np.where(np.isfinite(held.predicted[:, i]), observed[:, i], np.nan)
            add(part, "r_squared_attainable", r_squared_attainable(known, repeats.of_part(i), rows))
            places = float(repeated_places(known, repeats.of_part(i)))
            table.append(Score(part, "repeated_places", places, map_weighted=places))
    add("all", "energy_score", weighted_mean(held.draws.energy, rows))
    add("all", "aitchison_distance", weighted_mean(aitchison_distance(observed, held.predicted, limit), rows))
    add("all", "class_agreement", held.agreement.share(rows))
    add("all", "class_kappa", held.agreement.kappa(rows))
    for name, square in held.square_z.items():
        add(name, "mean_square_standardised_error", weighted_mean(square, rows))
    return table
