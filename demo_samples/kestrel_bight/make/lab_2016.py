"""The 2016 survey: positions from the ship on one sheet, weights from the laboratory on another."""

from datetime import datetime, timedelta
from itertools import pairwise
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import NDArray
from openpyxl import Workbook
from openpyxl.worksheet.worksheet import Worksheet
from scipy.stats import norm

from demo_samples.kestrel_bight.make.answers import Answer, degrees_at, true_at
from demo_samples.kestrel_bight.make.archive import settle
from demo_samples.kestrel_bight.make.stations import Samples, near, sample, scattered

Array = NDArray[np.float64]

FILE: Final = "lab_2016.xlsx"
POSITIONS: Final = "Positions"
WEIGHTS: Final = "Weights"
FIRST_ROW: Final = 4  # of the weights, under a title line and a header of two rows
LIMITS_PHI: Final = np.arange(-4.0, 10.0)  # sieves to 4 phi, pipette beyond; open at both ends
_START: Final = datetime(2016, 9, 5)
_NO_RESULT: Final = 41  # its jar broke on the way


def interval_names() -> list[str]:
    """Headings of the size intervals, coarse to fine."""
    between = [f"{a:.0f} to {b:.0f}" for a, b in pairwise(LIMITS_PHI)]
    return [f"< {LIMITS_PHI[0]:.0f}", *between, f"> {LIMITS_PHI[-1]:.0f}"]


def interval_fractions(fractions: Array) -> Array:
    """Spread mud, sand and gravel over the size intervals, as a believable grain-size curve.

    Parameters
    ----------
    fractions : float array, shape (n, 3)

    Returns
    -------
    float array, shape (n, 15)
        Coarse to fine; gravel is the first 4 intervals (coarser than -1 phi), mud the last 7 (finer than 4 phi).
    """
    mud, sand, gravel = fractions.T
    edges = np.concatenate([[-np.inf], LIMITS_PHI, [np.inf]])

    def spread(part: Array, low: float, high: float, centre: Array, width: float) -> Array:
        below = norm.cdf((np.clip(edges, low, high) - centre[:, None]) / width)
        share = np.diff(below, axis=1)
        return part[:, None] * share / share.sum(axis=1, keepdims=True)

    return (
        spread(gravel, -np.inf, -1.0, -1.4 - 1.6 * gravel, 1.1)
        + spread(sand, -1.0, 4.0, 1.9 + 1.3 * mud - 1.2 * gravel, 0.8)
        + spread(mud, 4.0, np.inf, 5.6 + 1.2 * mud, 1.8)
    )


def write_survey(path: Path, rng: np.random.Generator) -> list[Answer]:
    """Write the two sheets and return the key of the weights."""
    s, t = scattered(rng, 84, 3.2, (-34.0, -25.0, 34.0, 19.0))
    paired = near(rng, s[::2][:40], t[::2][:40], 0.12, 0.45)  # close pairs, to see what changes within a cell
    s, t = np.append(s, paired[0]), np.append(t, paired[1])
    samples = sample(s, t, rng)
    keep = np.nonzero(~samples.rock)[0]
    mass_g = rng.uniform(60.0, 180.0, s.size)
    weights_g = np.round(interval_fractions(samples.measured) * mass_g[:, None], 3)
    book = Workbook()
    _write_positions(book.active, samples, keep)
    sheet = book.create_sheet(WEIGHTS)
    _write_heading(sheet)
    answers = []
    order = rng.permutation(keep[keep != _NO_RESULT])  # the laboratory took the jars as they came
    for row, index in enumerate(order, start=FIRST_ROW):
        grams = [float(g) for g in weights_g[index]]
        for column, value in enumerate([_name(index), *grams, round(sum(grams), 3)], start=1):
            sheet.cell(row, column, value)
        total = sum(grams)
        stated = (sum(grams[9:]) / total, sum(grams[4:9]) / total, sum(grams[:4]) / total)
        longitude, latitude = (round(v, 5) for v in degrees_at(samples, int(index)))
        true = true_at(samples, int(index))
        answers.append(Answer(FILE, WEIGHTS, row, _name(index), longitude, latitude, *true, *stated, "whole"))
    book.properties.creator = "Kestrel Bight survey"
    book.properties.created = _START
    book.save(path)
    settle(path, _START)
    return answers


def _name(index: int) -> str:
    return f"KB16-{index + 1:03d}"


def _write_positions(sheet: Worksheet, samples: Samples, keep: NDArray[np.int64]) -> None:
    sheet.title = POSITIONS
    sheet.append(["Sample", "Date", "Latitude", "Longitude", "Depth (m)", "Gear"])
    for index in keep:
        longitude, latitude = (round(v, 5) for v in degrees_at(samples, int(index)))
        day = _START + timedelta(days=int(index) // 16)
        sheet.append([_name(index), day, latitude, longitude, round(float(samples.depth_m[index]), 1), "grab"])
        sheet.cell(sheet.max_row, 2).number_format = "yyyy-mm-dd"


def _write_heading(sheet: Worksheet) -> None:
    names = interval_names()
    sheet.cell(1, 1, "Dry weight in grams by phi interval; pipette weights scaled to the whole sample")
    sheet.cell(2, 1, "Sample")
    sheet.cell(2, 2, "Sieve, phi")
    sheet.cell(2, 11, "Pipette, phi")
    sheet.cell(2, 17, "Total (g)")
    for column, name in enumerate(names, start=2):
        sheet.cell(3, column, name)
    for block in ("A2:A3", "B2:J2", "K2:P2", "Q2:Q3"):
        sheet.merge_cells(block)
