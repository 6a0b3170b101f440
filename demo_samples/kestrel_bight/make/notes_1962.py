"""The 1962 notes: whole minutes and words, from the days of the lead line."""

from datetime import datetime
from pathlib import Path
from typing import Final

import numpy as np
from odf.opendocument import OpenDocumentSpreadsheet
from odf.table import Table, TableCell, TableRow
from odf.text import P

from demo_samples.kestrel_bight.make.answers import NOTHING, Answer, degrees_at, true_at
from demo_samples.kestrel_bight.make.archive import settle
from demo_samples.kestrel_bight.make.stations import Samples, sample, scattered

FILE: Final = "notes_1962.ods"
SHEET: Final = "Notes"
FIRST_ROW: Final = 3  # under a title line and the header
_STIFF_CLAY: Final = (14, 39)
_ROCK_KM: Final = np.array([[22.2, -3.6], [16.3, 5.4], [20.9, -2.9]])


def write_survey(path: Path, rng: np.random.Generator) -> list[Answer]:
    """Write the spreadsheet and return its key."""
    wide = scattered(rng, 46, 3.7, (-34.0, -23.0, 34.0, 19.0))
    belt = scattered(rng, 11, 2.0, (-17.0, 2.0, -3.0, 15.0))
    s, t = (np.concatenate(v) for v in zip(wide, belt, _ROCK_KM.T, strict=True))
    samples = sample(s, t, rng)
    rows: list[list[str]] = [
        ["Kestrel Bight, notes of the nature of the bottom, summer 1962"],
        ["No.", "Latitude", "Longitude", "Bottom"],
    ]
    answers = []
    for index in range(s.size):
        longitude, latitude = degrees_at(samples, index)
        latitude_text, latitude = _whole_minutes(latitude, "NS")
        longitude_text, longitude = _whole_minutes(longitude, "EW")
        word, what = _word(samples, index)
        rows.append([str(index + 1), latitude_text, longitude_text, word])
        true = NOTHING if what == "substrate" else true_at(samples, index)
        answers.append(
            Answer(FILE, SHEET, FIRST_ROW + index, str(index + 1), longitude, latitude, *true, *NOTHING, what)
        )
    _write_ods(path, rows)
    return answers


def _whole_minutes(degrees: float, hemispheres: str) -> tuple[str, float]:
    whole, minutes = divmod(round(abs(degrees) * 60.0), 60)
    return f"{whole}° {minutes:02d}' {hemispheres[degrees < 0.0]}", float(np.sign(degrees)) * (whole + minutes / 60.0)


def _word(samples: Samples, index: int) -> tuple[str, str]:
    """What the leadsman wrote, and what kind of row that makes."""
    if samples.rock[index]:
        return "rock", "hard_ground"
    if index in _STIFF_CLAY:
        return "stiff clay", "substrate"
    mud, _, gravel = samples.true[index]
    if gravel > 0.6:
        words: tuple[str, ...] = ("gravel", "coarse gravel")
    elif gravel > 0.3:
        words = ("muddy gravel",) if mud > 0.2 else ("shelly gravel", "sandy gravel")
    elif mud > 0.75:
        words = ("mud", "soft mud", "grey mud")
    elif mud > 0.5:
        words = ("sandy mud",)
    elif mud > 0.15:
        words = ("muddy sand", "sand and mud", "muddy sand")
    elif gravel > 0.05:
        words = ("gravelly sand", "sand and shells")
    else:
        words = ("sand", "fine sand", "clean sand")
    return words[index % len(words)], "words"


def _write_ods(path: Path, rows: list[list[str]]) -> None:
    document = OpenDocumentSpreadsheet()
    table = Table(name=SHEET)
    for cells in rows:
        line = TableRow()
        for text in cells:
            number = text.isdecimal()
            cell = TableCell(valuetype="float", value=text) if number else TableCell(valuetype="string")
            cell.addElement(P(text=text))
            line.addElement(cell)
        table.addElement(line)
    document.spreadsheet.addElement(table)
    document.save(str(path))
    settle(path, datetime(1998, 2, 3))
