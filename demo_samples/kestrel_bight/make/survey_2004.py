"""The 2004 survey: text exported on a computer that writes decimal commas."""

from datetime import date, timedelta
from pathlib import Path
from typing import Final

import numpy as np

from demo_samples.kestrel_bight.make import place
from demo_samples.kestrel_bight.make.answers import NOTHING, Answer, true_at
from demo_samples.kestrel_bight.make.stations import Samples, near, sample, scattered

FILE: Final = "survey_2004.csv"
FIRST_ROW: Final = 2
_START: Final = date(2004, 6, 14)
_HEADER: Final = (
    "Sample",
    "Date",
    "Easting [m]",
    "Northing [m]",
    "Depth [m]",
    "Mud <63 µm",
    "Sand 63 µm-2 mm",
    "Gravel >2 mm",
    "Remarks",
)
_REPEATED: Final = 56  # the station whose grab was repeated twice
_MUD_ONLY_COUNT: Final = 30


def write_survey(path: Path, rng: np.random.Generator) -> list[Answer]:
    """Write the text file (Windows code page 1252, semicolons) and return its key."""
    wide = scattered(rng, 110, 1.6, (-34.0, -24.0, 34.0, 19.0))
    mouth = scattered(rng, 40, 0.6, (-17.0, 8.0, -2.0, 18.0))
    stony = scattered(rng, 28, 0.6, (10.0, -1.0, 24.0, 12.0))
    s = np.concatenate([wide[0], mouth[0], stony[0]])
    t = np.concatenate([wide[1], mouth[1], stony[1]])
    order = np.argsort(np.round(s / 5.0) * 100.0 + t, kind="stable")  # as a ship would visit them
    s, t = s[order], t[order]
    again = near(rng, s[[_REPEATED] * 2], t[[_REPEATED] * 2], 0.02, 0.06)  # the ship drifts a little
    s, t = (np.insert(v, _REPEATED + 1, more) for v, more in zip((s, t), again, strict=True))
    samples = sample(s, t, rng)
    station = np.arange(s.size) - np.clip(np.arange(s.size) - _REPEATED, 0, 2)
    repeats = {_REPEATED + 1, _REPEATED + 2}
    can_be_partial = [i for i in range(s.size) if not samples.rock[i] and abs(i - _REPEATED) > 2]
    mud_only = {int(i) for i in rng.choice(can_be_partial, _MUD_ONLY_COUNT, replace=False)}
    lines, answers = [_HEADER], []
    for index in range(s.size):
        # Repeats carry the station's name and planned position.
        at = _REPEATED if index in repeats else index
        easting, northing = (round(float(v), 1) for v in place.to_utm(samples.s_km[at], samples.t_km[at]))
        numbers, what, remark = _result(samples, index, index in mud_only)
        if index in repeats:
            what, remark = "repeat", "repeat grab – same station"
        name = f"KB04-{station[index] + 1:03d}"
        day = _START + timedelta(days=index // 22)
        depth = f"{samples.depth_m[index]:.1f}"
        cells = ["" if np.isnan(n) else f"{n:.3f}" for n in numbers]
        plain = [f"{easting:.1f}", f"{northing:.1f}", depth, *cells]
        lines.append((name, day.strftime("%d.%m.%Y"), *(c.replace(".", ",") for c in plain), remark))
        longitude, latitude = (float(v) for v in place.to_degrees(samples.s_km[at], samples.t_km[at]))
        true = true_at(samples, index)
        answers.append(Answer(FILE, "", FIRST_ROW + index, name, longitude, latitude, *true, *numbers, what))
    path.write_bytes("".join(";".join(line) + "\r\n" for line in lines).encode("cp1252"))
    return answers


def _result(samples: Samples, index: int, mud_only: bool) -> tuple[tuple[float, ...], str, str]:
    if samples.rock[index]:
        return NOTHING, "hard_ground", "no sample – rock"
    mud, gravel = (round(float(samples.measured[index, part]), 3) for part in (0, 2))
    if mud_only:
        return (mud, np.nan, np.nan), "mud_only", "wet sieved at 63 µm only"
    return (mud, round(1.0 - mud - gravel, 3), gravel), "whole", ""
