"""Halves of the globe told by headings and by the letter O."""

import numpy as np
import pytest

from texture.errors import SampleError

ROWS = [[f"E{i}", 41.1 + 0.01 * i, 63.2 + 0.01 * i, 20.0, 70.0, 10.0] for i in range(6)]
PARTS = ["mud %", "sand %", "gravel %"]


@pytest.mark.parametrize(
    ("latitude", "longitude", "south", "west"),
    [
        ("Latitud (S)", "Longitud (O)", True, True),
        ("Lat S", "Long W", True, True),
        ("Latitude [°N]", "Longitude [°W]", False, True),
        ("Breite N", "Länge O", False, False),
        ("Latitude", "Longitude", False, False),
        ("Lat", "Lon", False, False),
    ],
)
def test_unsigned_degrees_lie_where_their_heading_says(read, latitude, longitude, south, west):
    stations = read([["id", latitude, longitude, *PARTS], *ROWS])
    assert (stations.table["latitude"] < 0).all() == south
    assert (stations.table["longitude"] < 0).all() == west
    told = [note for note in stations.notes if "the heading says" in note]
    assert len(told) == south + west


def test_signs_and_the_recipe_come_before_headings(read):
    rows = [[r[0], -r[1], r[2], *r[3:]] for r in ROWS]
    table = read([["id", "Latitud (S)", "Longitude (O)", *PARTS], *rows], block={"hemisphere": "E"}).table
    assert (table["latitude"] < 0).all()
    np.testing.assert_allclose(table["longitude"], [r[2] for r in ROWS])


def test_an_o_that_no_language_explains_is_refused_until_the_recipe_tells(read):
    with pytest.raises(
        SampleError, match=r'column "Longitude \(O\)": found the letter O, .* say hemisphere = "W" or "E"'
    ):
        read([["id", "Latitude (N)", "Longitude (O)", *PARTS], *ROWS])
    cells = [[r[0], f"48°1{i},5' N", f"5°2{i},2' O", *r[3:]] for i, r in enumerate(ROWS)]
    head = ["id", "Latitude", "Longitude", *PARTS]
    with pytest.raises(SampleError, match=r'most often because: the letter O .*: say hemisphere = "W" or "E"'):
        read([head, *cells])
    west, east = (read([head, *cells], block={"hemisphere": x}).table["longitude"] for x in "WE")
    np.testing.assert_allclose(west, -east)
    assert west[0] == pytest.approx(-(5 + 20.2 / 60))
