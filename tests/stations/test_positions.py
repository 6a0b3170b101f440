"""Positions in every notation, in degrees and in metres."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from texture.errors import RecipeError, SampleError
from texture.stations.angles import parse_angle, parse_pair
from texture.stations.metres import from_metres
from texture.stations.positions import read_degrees
from texture.stations.where import Where

LON, LAT = Where("a.csv", "", "Lon"), Where("a.csv", "", "Lat")
EAST, NORTH = Where("a.csv", "", "E"), Where("a.csv", "", "N")


# ISO 6709's own example of one place in three forms (from memory; the arithmetic is checked here) and sexagesimal arithmetic
@pytest.mark.parametrize(
    ("text", "axis", "degrees"),
    [
        ("+40.20361", "latitude", 40.20361),
        ("+4012.22", "latitude", 40.203667),
        ("+401213.1", "latitude", 40.203639),
        ("-07500.25", "longitude", -75.004167),
        ("-0750015.1", "longitude", -75.004194),
        ("52 30 15.6 N", "latitude", 52.504333),
        ("3 07 48 W", "longitude", -3.13),
        ("0 00 36 W", "longitude", -0.01),
        ("50 59.5", "latitude", 50.991667),
        ("50°59.5'N", "latitude", 50.991667),
        ("N 50° 59' 30\"", "latitude", 50.991667),
        ("50-59,5 N", "latitude", 50.991667),
        ("50º 59′ 30″ Nord", "latitude", 50.991667),
        ("5059.5N", "latitude", 50.991667),
        ("-3.13", "longitude", -3.13),
        ("3.13 West", "longitude", -3.13),
    ],
)
def test_one_angle(text, axis, degrees):
    assert parse_angle(text, axis)[0] == pytest.approx(degrees, abs=1e-6)


@pytest.mark.parametrize(
    ("text", "axis", "reason"),
    [
        ("54 60.0 N", "latitude", "minutes of 60 or more"),
        ("54 12 61 N", "latitude", "seconds of 60 or more"),
        ("54.5 12 N", "latitude", "only the last"),
        ("3 12 O", "longitude", "west in some languages and east in others"),
        ("-3 12 E", "longitude", "a minus sign contradicts the letter E"),
        ("54 12 E", "latitude", "is no latitude"),
        ("95 12 N", "latitude", "more than 90 degrees"),
        ("off the reef", "latitude", "is no latitude"),
    ],
)
def test_what_cannot_be_an_angle_says_why(text, axis, reason):
    with pytest.raises(ValueError, match=reason):
        parse_angle(text, axis)


@given(st.integers(0, 89), st.integers(0, 59), st.integers(0, 5999), st.sampled_from("NS"))
def test_every_notation_of_one_place_agrees(degrees, minutes, hundredths, letter):
    seconds = hundredths / 100
    expected = (degrees + minutes / 60 + seconds / 3600) * (1 if letter == "N" else -1)
    sign = "-" if letter == "S" else "+"
    forms = [
        f"{degrees}°{minutes}'{seconds:.2f}\" {letter}",
        f"{letter}{degrees} {minutes} {seconds:.2f}",
        f"{sign}{degrees:02d}{minutes:02d}{seconds:05.2f}",
        f"{degrees}° {minutes + seconds / 60:.9f}' {letter}" if minutes + seconds / 60 < 59.999 else f"{expected}",
    ]
    for text in forms:
        assert parse_angle(text, "latitude")[0] == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize(
    "text",
    [
        "+40.20361-75.00417/",
        "40.20361, -75.00417",
        "40.20361N 75.00417W",
        "N40.20361 W75.00417",
        "75.00417W; 40.20361N",
        "(40.20361; -75.00417)",
    ],
)
def test_combined_positions(text):
    latitude, longitude = parse_pair(text)
    assert parse_angle(latitude, "latitude")[0] == pytest.approx(40.20361)
    assert parse_angle(longitude, "longitude")[0] == pytest.approx(-75.00417)


def test_accuracy_is_what_the_digits_are_worth():
    # common practice, no source: a whole minute of latitude is 1.85 km, so ±0.9 km
    whole_minutes = read_degrees(["3 12 E"], ["54 07 N"], (LON, LAT), [2])
    assert whole_minutes.accuracy_m[0] == pytest.approx(926.6, abs=1)
    tenths = read_degrees(["3 12.1 E", "3 13.0 E"], ["54 07.4 N", "54 08.0 N"], (LON, LAT), [2, 3])
    np.testing.assert_allclose(tenths.accuracy_m, 92.66, atol=0.1)
    assert read_degrees([3.2001], [54.1002], (LON, LAT), [2]).accuracy_m[0] == pytest.approx(5.56, abs=0.01)


def test_unreadable_and_blank_positions_say_so():
    found = read_degrees(["3.1", "", 0, 3.2, 3.3], ["54 61 N", "", 0, 99.0, 54.3], (LON, LAT), range(2, 7))
    assert np.isnan(found.longitude).tolist() == [True, True, True, True, False]
    assert "minutes of 60" in found.problem[0]
    assert found.problem[1] == "no position"
    assert "0, 0" in found.problem[2]
    assert "more than 90" in found.problem[3]
    assert found.problem[4] == ""


def test_metres_given_as_degrees():
    with pytest.raises(
        SampleError,
        match=r'a\.csv, row 2, column "Lon": found 667294\.8, expected degrees of longitude.*easting and northing',
    ):
        read_degrees([667294.8, 667300.0], [6655205.5, 6655300.0], (LON, LAT), [2, 3])


def test_degrees_given_as_metres():
    with pytest.raises(SampleError, match=r'row 2, column "E": found 3\.1 .*expected metres; these look like degrees'):
        from_metres([3.1, 3.2], [54.1, 54.2], (EAST, NORTH), [2, 3], "EPSG:32631")


def test_metres_without_a_system():
    with pytest.raises(SampleError, match=r'easting and northing without a coordinate system.*add crs = "EPSG:…"'):
        from_metres([667294.8], [6655205.5], (EAST, NORTH), [2], None)


def test_an_unknown_system_and_metres_for_degrees():
    with pytest.raises(RecipeError, match='crs = "EPSG:999999" is no known coordinate system'):
        from_metres([667294.8], [6655205.5], (EAST, NORTH), [2], "EPSG:999999")
    with pytest.raises(RecipeError, match="which is in metres, but the column holds degrees"):
        read_degrees([3.1], [54.1], (LON, LAT), [2], "EPSG:32631")


def test_swapped_easting_and_northing():
    with pytest.raises(SampleError, match="wrong zone, or easting and northing are swapped"):
        from_metres([6655205.5, 6655300.0], [667294.8, 667300.0], (EAST, NORTH), [2, 3], "EPSG:32631")


# EPSG guidance note 7-2 (test points, from memory) and zone arithmetic of UTM; tolerance 2e-7 degrees is 0.02 m
@pytest.mark.parametrize(
    ("crs", "east", "north", "longitude", "latitude"),
    [
        ("EPSG:3035", 3962799.45, 2999718.85, 5.0, 50.0),
        ("EPSG:32631", 667294.8211, 6655205.4836, 6.0, 60.0),
        ("EPSG:32633", 291962.5879, 4640626.1119, 12.4924, 41.8902),
        ("EPSG:32721", 396339.9845, 4271262.8098, -58.5, -51.7),
    ],
)
def test_published_projection_points(crs, east, north, longitude, latitude):
    found = from_metres([east], [north], (EAST, NORTH), [2], crs)
    assert found.longitude[0] == pytest.approx(longitude, abs=3e-7)
    assert found.latitude[0] == pytest.approx(latitude, abs=2e-7)
    assert "WGS 84" in found.notes[0]


def test_eastings_typed_to_full_hundreds_are_worth_fifty_metres():
    found = from_metres([667200, 667300, 668900], [6655200, 6655300, 6657100], (EAST, NORTH), [2, 3, 4], "EPSG:32631")
    np.testing.assert_allclose(found.accuracy_m, 50.0)
