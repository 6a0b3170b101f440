"""Headings as people write them, and what they are taken for."""

import pytest

from texture.stations.headings import is_unit, role_of, unit_in

# common practice, no source: headings of the kind that sample sheets carry
HEADINGS = {
    "latitude": ["Lat. (°N)", "LAT_WGS84", "Latitude_decimal", "DecLat", "Latitud (N)", "Breite N"],
    "longitude": ["Long. (°E)", "lon_dd", "DecLong", "Länge E", "Laenge", "Lengte"],
    "easting": ["Easting (m)", "UTM_X", "x_coord", "X (m)", "Coordenada X", "Rechtswert"],
    "northing": ["Northing (m)", "UTM N", "y_coord", "Y (m)", "Hochwert"],
    "mud": [
        "% Mud",
        "MUD_PC",
        "%<63µm",
        "Fines (<63 µm) %",
        "<0.063 mm",
        "Silt/Clay (%)",
        "silt-clay %",
        "Ton+Schluff",
        "Pelite <63",
    ],
    "sand": ["SAND_PC", "Sand (63µm-2mm)", "Total sand %", "Arena total"],
    "gravel": ["Gravel>2mm", ">2mm", "Gravel and shell %", "Kies (%)"],
    "depth": ["Water depth (m)", "Profundidad (m)", "Bottom depth", "Depth_m"],
    "id": ["SampleID", "Sample_No", "STN", "Site code", "GrabNo", "Stationsnummer", "Lab ref"],
    "sample_top": ["Top (cm)", "Depth from (cm)", "Core top (cm)"],
    "sample_bottom": ["Bottom (cm)", "Depth to (cm)"],
    "description": ["Sediment type", "Nature of bottom", "Folk class"],
}
NOT_ROLES = [
    "Very fine sand",
    "Coarse sand %",
    "Median (mm)",
    "Sand:mud ratio",
    "Mud temperature",
    "Sand D50",
    "Gear",
    "Fine gravel",
    "Mud colour",
]


@pytest.mark.parametrize(("role", "heading"), [(r, h) for r, hs in HEADINGS.items() for h in hs])
def test_a_heading_names_its_role(role, heading):
    found = role_of(heading)
    assert found is not None
    assert found[0] == role


@pytest.mark.parametrize("heading", NOT_ROLES)
def test_what_only_carries_the_name_of_a_part_is_no_share(heading):
    found = role_of(heading)
    assert found is None or found[0] not in ("mud", "sand", "gravel", "silt", "clay")


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("Mud (%)", "percent"),
        ("wt %", "percent"),
        ("depth [m]", "m"),
        ("63 µm", "um"),
        ("fathoms", "fathom"),
        ("‰", "permille"),
        ("Station", None),
    ],
)
def test_units(text, unit):
    assert unit_in(text) == unit


def test_a_data_cell_is_no_unit():
    assert not any(is_unit(cell) for cell in ("A1", "12.5", "mud", "", None, 3.0, "54 12.3 N"))
