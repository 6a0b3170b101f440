"""Angles as people write them: degrees, minutes and seconds with marks, signs, letters, or packed (ISO 6709).

Hemisphere letters: N, S, E, W and the words they stand for. A lone `O` is refused unless the recipe or the heading tells, since
it is west in Spanish, French and Italian but east in German and Dutch.
"""

from __future__ import annotations

import re
from collections.abc import Sequence

from texture.stations.files import Cell, is_blank
from texture.stations.where import shown

__all__ = ["angle_digits", "join_fields", "parse_angle", "parse_pair", "split_pairs"]

_SECONDS_MARK = re.compile(r"''|″|”|“|\"|˝")
_MINUTES_MARK = re.compile(r"′|’|‘|´|`|ʹ|'")
_DEGREE_MARK = re.compile(r"º|˚|∘|°|\bdeg(?:rees?)?\b")
_LETTER = re.compile(
    r"\b(north|south|east|west|norte|sur|este|oeste|nord|sud|est|ouest|ost|sued|süd|oost|zuid|noord)\b|(?<![^\W\d_])[nsewo](?![^\W\d_])",
    re.I,
)
_WORDS = {
    "north": "N", "norte": "N", "nord": "N", "noord": "N", "south": "S", "sur": "S", "sud": "S", "sued": "S", "süd": "S", "zuid": "S",
    "east": "E", "este": "E", "est": "E", "ost": "E", "oost": "E", "west": "W", "oeste": "W", "ouest": "W",
}  # fmt: skip
_FIELD = re.compile(r"\d+(?:[.,]\d+)?|[.,]\d+")
_ISO_PAIR = re.compile(r"([+-]\d{2,6}(?:[.,]\d+)?)([+-]\d{2,7}(?:[.,]\d+)?)(?:[+-]\d+(?:[.,]\d+)?)?(?:CRS\S*)?/?")


def parse_angle(text: str, axis: str, o_is: str = "") -> tuple[float, float]:
    """Read one latitude or longitude; return degrees and half the step of its last digit, in degrees.

    Understood: decimal degrees, degrees and minutes, degrees, minutes and seconds, with or without marks,
    a sign or a hemisphere letter, and the packed ISO 6709 forms (±DDMM.m, ±DDMMSS.s, or with a letter).

    Parameters
    ----------
    text : str
    axis : {"latitude", "longitude"}
    o_is : {"", "W", "E"}
        What a lone `O` means; refused if empty.

    Raises
    ------
    ValueError
        With the reason, in words for the row's entry in the table of rows set aside.

    Examples
    --------
    >>> round(parse_angle("52°30'15.6\\" N", "latitude")[0], 6), round(parse_angle("0 00 36 W", "longitude")[0], 6)
    (52.504333, -0.01)
    """
    clean = text.strip().replace("−", "-").replace("–", "-").replace("\xa0", " ")
    clean = _DEGREE_MARK.sub("°", clean)
    letters: list[str] = []

    def note(match: re.Match[str]) -> str:
        letters.append(_WORDS.get(match[0].casefold(), match[0].upper()))
        return " "

    body = _LETTER.sub(note, clean).strip()
    if "O" in letters and not o_is:
        raise ValueError(
            'the letter O in longitudes is west in some languages and east in others: say hemisphere = "W" or "E"'
        )
    letters = [o_is if letter == "O" else letter for letter in letters]
    wanted = "NS" if axis == "latitude" else "EW"
    if len(letters) > 1 or (letters and letters[0] not in wanted):
        raise ValueError(f"{shown(text)} is no {axis}")
    signed = body[:1] in "+-" and body != ""
    negative = body.startswith("-")
    body = body.lstrip("+-").strip()
    if negative and letters and letters[0] in "NE":
        raise ValueError(f"{shown(text)}: a minus sign contradicts the letter {letters[0]}")
    body = _MINUTES_MARK.sub("'", _SECONDS_MARK.sub('"', body))
    fields = _FIELD.findall(body)
    if not fields or re.sub(r"[\d.,°'\":\s\-/]", "", body):
        raise ValueError(f"{shown(text)} is no {axis}")
    if len(fields) == 1 and (signed or letters):
        fields = _unpack(fields[0], 2 if axis == "latitude" else 3)
    if len(fields) > 3:
        raise ValueError(f"{shown(text)} is no {axis}")
    degrees, half = _add_up(fields, text)
    if degrees > (90.0 if axis == "latitude" else 360.0):
        raise ValueError(f"{shown(text)} is no {axis}: more than {90 if axis == 'latitude' else 360} degrees")
    if negative or (letters and letters[0] in "SW"):
        degrees = -degrees
    return degrees, half


def parse_pair(text: str) -> tuple[str, str]:
    """Split one text that holds latitude and longitude into the two.

    Two plain numbers are latitude first, the order in which positions are written.

    >>> parse_pair("+40.20361-75.00417/"), parse_pair("54°12.3'N, 003°24.5'W"), parse_pair("54.2 -3.4")
    (('+40.20361', '-75.00417'), ("54°12.3'N", "003°24.5'W"), ('54.2', '-3.4'))
    """
    clean = text.strip().strip("()[]").strip().replace("−", "-")
    if match := _ISO_PAIR.fullmatch(clean.replace(" ", "")):
        return match[1], match[2]
    if match := re.fullmatch(r"(.*?[NSns])[\s,;/]*([\d+-].*?[EWew])", clean):
        return match[1].strip(), match[2].strip()
    if match := re.fullmatch(r"([NSns].*?)[\s,;/]*([EWew].*)", clean):
        return match[1].strip(), match[2].strip()
    if match := re.fullmatch(r"([\d+-].*?[EWew])[\s,;/]*([\d+-].*?[NSns])", clean):
        return match[2].strip(), match[1].strip()
    for separator in (";", ", ", "/", ","):
        parts = [p.strip() for p in clean.split(separator)]
        if len(parts) == 2 and all(_FIELD.search(p) for p in parts):
            return parts[0], parts[1]
    parts = clean.split()
    if len(parts) == 2:
        return parts[0], parts[1]
    raise ValueError(f"{shown(text)} is no position")


def split_pairs(cells: Sequence[Cell]) -> tuple[list[Cell], list[Cell]]:
    """Split a column of combined positions; a cell that cannot be split goes to both halves as it is."""
    latitude: list[Cell] = []
    longitude: list[Cell] = []
    for cell in cells:
        try:
            pair: tuple[Cell, Cell] = parse_pair(cell) if isinstance(cell, str) and cell.strip() else (cell, cell)
        except ValueError:
            pair = (cell, cell)
        latitude.append(pair[0])
        longitude.append(pair[1])
    return latitude, longitude


def angle_digits(cell: str) -> tuple[int, int]:
    """Number of fields and digits after the point of the last one."""
    found = _FIELD.findall(cell)
    return len(found), len(re.split(r"[.,]", found[-1])[1]) if re.search(r"[.,]", found[-1]) else 0


def _unpack(field: str, width: int) -> list[str]:
    """Split a packed ISO 6709 field: `width` digits of degrees, two of minutes, two of seconds."""
    whole, point, rest = field.replace(",", ".").partition(".")
    if len(whole) == width + 2:
        return [whole[:width], whole[width:] + point + rest]
    if len(whole) == width + 4:
        return [whole[:width], whole[width : width + 2], whole[width + 2 :] + point + rest]
    return [field]


def _add_up(fields: list[str], text: str) -> tuple[float, float]:
    numbers = [float(f.replace(",", ".")) for f in fields]
    if any(not float(n).is_integer() for n in numbers[:-1]):
        raise ValueError(f"{shown(text)}: only the last of degrees, minutes and seconds may have decimals")
    for name, number in zip(("minutes", "seconds"), numbers[1:], strict=False):
        if number >= 60.0:
            raise ValueError(f"{shown(text)}: {name} of 60 or more")
    last = fields[-1].replace(",", ".").partition(".")[2]
    scale = 60.0 ** (len(fields) - 1)
    return sum(n / 60.0**k for k, n in enumerate(numbers)), 0.5 * 10.0 ** -len(last) / scale


def join_fields(*columns: Sequence[Cell]) -> list[Cell]:
    """Join columns of degrees, minutes, seconds and hemisphere to one column of texts; blank where degrees are blank.

    >>> join_fields([54, "55", None], [12.5, "", 3.0], ["N", "S", "N"])
    ['54 12.5 N', '55 S', None]
    """
    joined: list[Cell] = []
    for cells in zip(*columns, strict=True):
        texts = [f"{c:.10g}" if isinstance(c, float) else str(c).strip() for c in cells if not is_blank(c)]
        joined.append(" ".join(texts) if texts and not is_blank(cells[0]) else None)
    return joined
