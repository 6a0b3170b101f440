"""The key to the four surveys: what each spreadsheet row truly is, for tests."""

import csv
from dataclasses import astuple, dataclass, fields
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from demo_samples.kestrel_bight.make import place
from demo_samples.kestrel_bight.make.stations import Samples

Array = NDArray[np.float64]
NOTHING = (np.nan, np.nan, np.nan)


@dataclass(frozen=True)
class Answer:
    """One spreadsheet row.

    Attributes
    ----------
    row : int
        As the spreadsheet program numbers it, the first is 1. For a joined table, the row of the result.
    longitude, latitude : float
        As written in the file, degrees.
    true_mud, true_sand, true_gravel : float
        The bed where the sample was really taken (NaN on bare rock).
    mud, sand, gravel : float
        The numbers the row states, as fractions; NaN where it states none, or a limit or a word.
    what : str
        whole, limit, completed, mud_only, hard_ground, lost, bad_sum, repeat, on_land, words or substrate.
    """

    file: str
    sheet: str
    row: int
    id: str
    longitude: float
    latitude: float
    true_mud: float
    true_sand: float
    true_gravel: float
    mud: float
    sand: float
    gravel: float
    what: str


def true_at(samples: Samples, index: int) -> tuple[float, float, float]:
    """True fractions of a sample, or NaN where there is only rock."""
    if samples.rock[index]:
        return NOTHING
    mud, sand, gravel = samples.true[index]
    return float(mud), float(sand), float(gravel)


def degrees_at(samples: Samples, index: int) -> tuple[float, float]:
    """Longitude and latitude of a sample."""
    longitude, latitude = place.to_degrees(samples.s_km[index], samples.t_km[index])
    return float(longitude), float(latitude)


def write_answers(path: Path, answers: list[Answer]) -> None:
    """Write the key; positions to 1e-6 degrees, fractions to 1e-6, blank where there is none."""

    def cell(value: object) -> object:
        if not isinstance(value, float):
            return value
        return "" if np.isnan(value) else f"{value:.6f}"

    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow([field.name for field in fields(Answer)])
        writer.writerows([cell(value) for value in astuple(answer)] for answer in answers)
