"""The 1987 survey: a spreadsheet typed up from a cruise report."""

from datetime import datetime, timedelta
from pathlib import Path
from typing import Final

import numpy as np
from openpyxl import Workbook
from openpyxl.styles import Alignment, Font
from openpyxl.worksheet.worksheet import Worksheet

from demo_samples.kestrel_bight.make import place
from demo_samples.kestrel_bight.make.answers import NOTHING, Answer, degrees_at, true_at
from demo_samples.kestrel_bight.make.archive import settle
from demo_samples.kestrel_bight.make.stations import Samples, sample, transects

FILE: Final = "survey_1987.xlsx"
SHEET: Final = "Stations"
FIRST_ROW: Final = 7  # under three title lines, a header of two rows and a units row
_START: Final = datetime(1987, 5, 11)
_REEF_STATIONS_KM: Final = np.array([[21.2, -3.1], [22.6, -3.9], [16.0, 5.3]])  # nothing will come up here
_LOST: Final = (23, 88, 131)
_MUD_ONLY: Final = (12, 37, 64, 70, 101, 119)
_GRAVEL_BLANK: Final = (9, 45, 58, 107, 126)
_BAD_SUM: Final = 76
_REMARKS: Final = {
    5: "shell fragments",
    17: "H2S smell",
    30: "worm tubes",
    52: "second attempt",
    93: "fine laminae",
    112: "shell hash",
}


def degrees_minutes(degrees: float, hemispheres: str) -> tuple[str, float]:
    """Write degrees as degrees and hundredths of minutes with a letter, and say what was written."""
    whole, minutes = divmod(round(abs(degrees) * 6000.0), 6000)
    text = f"{whole} {minutes / 100.0:05.2f} {hemispheres[degrees < 0.0]}"
    return text, float(np.sign(degrees)) * (whole + minutes / 6000.0)


def write_survey(path: Path, rng: np.random.Generator) -> list[Answer]:
    """Write the spreadsheet and return its key."""
    s, t = transects(rng)
    s, t = np.append(s, _REEF_STATIONS_KM[:, 0]), np.append(t, _REEF_STATIONS_KM[:, 1])
    # This laboratory's long dispersal makes its mud read a little high.
    samples = sample(s, t, rng, mud_offset=0.12)
    book = Workbook()
    sheet = book.active
    sheet.title = SHEET
    _write_heading(sheet)
    ashore = _nearest_to_shore(samples)
    answers = []
    for index in range(s.size):
        longitude, latitude = degrees_at(samples, index)
        if index == ashore:  # a slip of the plotter: 350 m towards the land
            longitude, latitude = (float(v) for v in place.to_degrees(*_shift_ashore(samples, index)))
        longitude_text, longitude = degrees_minutes(longitude, "EW")
        latitude_text, latitude = degrees_minutes(latitude, "NS")
        cells, stated, what, remark = _result(samples, index)
        if index == ashore:
            what = "on_land"
        row = FIRST_ROW + index
        day = _START + timedelta(days=index // 13)
        name = f"KB87-{index + 1:03d}"
        values = [name, day, latitude_text, longitude_text, round(float(samples.depth_m[index]), 1), *cells, remark]
        for column, value in enumerate(values, start=1):
            sheet.cell(row, column, value)
        sheet.cell(row, 2).number_format = "dd/mm/yyyy"
        true = true_at(samples, index)
        answers.append(Answer(FILE, SHEET, row, name, longitude, latitude, *true, *stated, what))
    sheet.cell(
        FIRST_ROW + s.size + 1,
        1,
        "Note: trace = seen, not weighed. Blank = not determined. Depths not corrected for tide.",
    )
    for column, width in zip("ABCDEFGHI", (11, 12, 14, 14, 12, 9, 9, 9, 24), strict=True):
        sheet.column_dimensions[column].width = width
    book.properties.creator = "Kestrel Bight survey"
    book.properties.created = _START
    book.save(path)
    settle(path, _START)
    return answers


def _write_heading(sheet: Worksheet) -> None:
    titles = (
        "Kestrel Bight, survey of the sea bed, May 1987",
        "Grab 0.1 m2; positions WGS 84; percent of dry weight",
        "Mud is finer than 0.063 mm, gravel coarser than 2 mm",
    )
    for row, title in enumerate(titles, start=1):
        sheet.cell(row, 1, title).font = Font(bold=row == 1)
    top = ("Station", "Date", "Position", None, "Water depth", "Grain size", None, None, "Remarks")
    below = (None, None, "Latitude", "Longitude", None, "Mud", "Sand", "Gravel", None)
    units = (None, None, "deg min", "deg min", "m", "%", "%", "%", None)
    for row, names in enumerate((top, below, units), start=4):
        for column, name in enumerate(names, start=1):
            sheet.cell(row, column, name).alignment = Alignment(horizontal="center")
    for block in ("A4:A5", "B4:B5", "C4:D4", "E4:E5", "F4:H4", "I4:I5"):
        sheet.merge_cells(block)


def _result(samples: Samples, index: int) -> tuple[list[object], tuple[float, ...], str, str | None]:
    """The three cells, the numbers they state, what the row is, and its remark."""
    remark = _REMARKS.get(index)
    if samples.rock[index]:
        return [None, None, None], NOTHING, "hard_ground", "no recovery, rock"
    if index in _LOST:
        return [None, None, None], NOTHING, "lost", "sample lost"
    if index == _BAD_SUM:
        return [62.0, 65.0, 10.0], (0.62, 0.65, 0.10), "bad_sum", remark
    percent = [round(100.0 * float(part), 1) for part in samples.measured[index]]
    cells: list[object] = list(percent)
    stated = [part / 100.0 for part in percent]
    if index in _MUD_ONLY:
        return [cells[0], None, None], (stated[0], np.nan, np.nan), "mud_only", remark
    if index in _GRAVEL_BLANK:
        return [*cells[:2], None], (*stated[:2], np.nan), "completed", remark
    what = "whole"
    for part in (0, 2):
        if 0.0 < percent[part] < 1.0:
            cells[part] = "trace" if percent[part] < 0.4 else "<1"
            stated[part], what = np.nan, "limit"
    return cells, (stated[0], stated[1], stated[2]), what, remark


def _nearest_to_shore(samples: Samples) -> int:
    away = place.shore_distance_km(samples.s_km, samples.t_km)
    return int(np.argmin(np.where(samples.rock | (samples.t_km < 10.0), np.inf, away)))


def _shift_ashore(samples: Samples, index: int) -> tuple[float, float]:
    """Move a station north until it is 350 m inland."""
    s, t = samples.s_km[index : index + 1], samples.t_km[index] + np.arange(0.0, 3.0, 0.01)
    s = np.full(t.size, s[0])
    inland = place.on_land(s, t) & (place.shore_distance_km(s, t) > 0.35)
    return float(s[0]), float(t[np.argmax(inland)])
