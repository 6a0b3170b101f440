"""Halves of the globe that a heading tells: "Latitud (S)", "Long W", "Länge (O)"."""

from __future__ import annotations

import re
from collections.abc import Mapping

from texture.stations.columns import Column
from texture.stations.headings import plain
from texture.stations.tables import Table

__all__ = ["half_in", "halves_of", "o_in"]

_HALF = re.compile(
    r"(?<![/\w])(s|south|sur|sud|sul|sued|zuid|n|north|norte|nord|noord|w|west|oeste|ouest|ovest|e|east|este|est|ost|oost|o)$"
)
_LETTER = {
    "south": "S", "sur": "S", "sud": "S", "sul": "S", "sued": "S", "zuid": "S", "north": "N", "norte": "N", "nord": "N", "noord": "N",
    "west": "W", "oeste": "W", "ouest": "W", "ovest": "W", "east": "E", "este": "E", "est": "E", "ost": "E", "oost": "E",
}  # fmt: skip
_WEST_IS_O = re.compile(
    r"\blon(g)?itud\b|\blongitudine\b"
)  # Spanish, Italian; French and Portuguese write as the English do
_EAST_IS_O = re.compile(r"\blae?nge\w*\b|\blengte\w*\b")


def half_in(heading: str) -> str:
    """Letter of the half of the globe at the end of a heading: N, S, E, W, or O where its language does not tell; empty if none.

    >>> [half_in(h) for h in ("Latitud (S)", "Longitud (O)", "Länge [°O]", "Longitude (O)", "Lat N/S", "Longitude")]
    ['S', 'W', 'E', 'O', '', '']
    """
    words = plain(heading)
    found = _HALF.search(words)
    if found is None or found.start() == 0:
        return ""
    letter = _LETTER.get(found[1], found[1].upper())
    return (o_in(heading) or "O") if letter == "O" else letter


def o_in(heading: str) -> str:
    """What a lone O means in the language of a heading: W or E; empty where it does not tell.

    >>> o_in("Longitud"), o_in("Länge"), o_in("Longitude")
    ('W', 'E', '')
    """
    words = plain(heading)
    return "W" if _WEST_IS_O.search(words) else "E" if _EAST_IS_O.search(words) else ""


def halves_of(table: Table, columns: Mapping[str, Column], said: str) -> tuple[str, tuple[str, ...]]:
    """Halves in which degrees without sign or letter lie: as the recipe says, else as the headings of the two columns do.

    Returns
    -------
    halves : str
        Letters such as "SW"; empty for north and east.
    notes : tuple of str

    Raises
    ------
    SampleError
        If a heading says O, which is west in some languages and east in others, and the recipe says nothing of it.
    """
    halves, notes = said, []
    for role, letters in (("latitude", "NS"), ("longitude", "EWO")):
        column = columns.get(role)
        if column is None or any(x in said for x in letters):
            continue
        told = half_in(column.heading) or half_in(f"{role} {table.units[column.index]}")
        if told == "O":
            raise table.where.at(column.heading).error(
                "the letter O, which is west (ouest, oeste, ovest) in some languages and east (Ost, oost) in others",
                "one that says which",
                'say hemisphere = "W" or "E" in this samples block',
            )
        if told in ("S", "W"):
            halves += told
            half = "south" if told == "S" else "west"
            notes.append(
                f"{table.where.at(column.heading).text()}: the heading says {half}; numbers without a sign are degrees {half}"
            )
    return halves, tuple(notes)
