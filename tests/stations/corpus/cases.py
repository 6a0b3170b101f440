"""The corpus: small awkward files, one trouble each, with the table, the account and the audit that they must give.

All are variations of one invented survey of six grabs, exact in tenths of a percent. A case lists only what differs from it.
"""

import datetime as dt
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

from tests.stations.corpus.makers import ods, stale_dimension, text, xlsx

HEAD = ["Station", "Latitude", "Longitude", "Mud (%)", "Sand (%)", "Gravel (%)", "Remarks"]
BASE: list[list[Any]] = [
    ["A1", 54.101, 3.201, 12.5, 80.0, 7.5, ""],
    ["A2", 54.112, 3.212, 30.0, 65.0, 5.0, ""],
    ["A3", 54.123, 3.223, 5.5, 94.5, 0.0, ""],
    ["A4", 54.134, 3.234, 60.0, 40.0, 0.0, "soft"],
    ["A5", 54.145, 3.245, 1.5, 48.5, 50.0, ""],
    ["A6", 54.156, 3.256, 22.2, 77.7, 0.1, ""],
]
NAN = float("nan")
Row = list[Any]


@dataclass(frozen=True)
class Case:
    """One awkward file.

    `changed` gives, for an id, what differs from the base in the stations table; `gone` the ids that are no stations; `counts`
    the account where it is not "six used, one header"; `aside` the reasons of rows set aside; `audit` rows as
    (row, column, old, new).
    """

    name: str
    content: bytes
    file: str = "survey.csv"
    block: dict[str, Any] = field(default_factory=dict)
    changed: dict[str, dict[str, Any]] = field(default_factory=dict)
    gone: tuple[str, ...] = ()
    counts: dict[str, int] = field(default_factory=dict)
    aside: tuple[str, ...] = ()
    audit: tuple[tuple[int, str, str, str], ...] = ()
    notes: tuple[str, ...] = ()
    atol: float = 1e-12


def rows(change: Callable[[Row], Row] | None = None, **cells: Any) -> list[Row]:
    """The base rows, each changed by a function, or single cells replaced: `A1_3="<1"` is A1's column 3."""
    out = [list(r) for r in BASE]
    for key, value in cells.items():
        name, _, column = key.partition("_")
        next(r for r in out if r[0] == name)[int(column)] = value
    return [change(r) for r in out] if change else out


def table(head: Sequence[Any] = HEAD, change: Callable[[Row], Row] | None = None, **cells: Any) -> list[Row]:
    return [list(head), *rows(change, **cells)]


def comma(row: Row) -> Row:
    return [str(c).replace(".", ",") if isinstance(c, float) else c for c in row]


def dm(value: float, digits: int = 4) -> str:
    return f"{int(value)} {(value - int(value)) * 60:.{digits}f}"


def dms(value: float, letter: str) -> str:
    minutes = (value - int(value)) * 60
    return f"{int(value)}°{int(minutes):02d}'{(minutes - int(minutes)) * 60:05.2f}\"{letter}"


def with_place(head: Sequence[str], place: Callable[[float, float], Sequence[Any]]) -> list[Row]:
    """The base table with its two position columns replaced."""
    return [[HEAD[0], *head, *HEAD[3:]], *[[r[0], *place(r[1], r[2]), *r[3:]] for r in BASE]]


def utm(latitude: float, longitude: float) -> tuple[float, float]:
    import pyproj

    east, north = pyproj.Transformer.from_crs(4326, 32631, always_xy=True).transform(longitude, latitude)
    return round(east, 3), round(north, 3)


def everywhere(**values: Any) -> dict[str, dict[str, Any]]:
    return {r[0]: values for r in BASE}


FILES = (
    Case("plain", text(table())),
    Case("semicolons and decimal commas", text(table(change=comma), ";")),
    Case("tabs", text(table(), "\t"), "survey.txt"),
    Case("bars", text(table(), "|"), "survey.txt"),
    Case("runs of spaces", "\n".join("   ".join(str(c) for c in r[:6]) for r in table([h.replace(" (%)", "%") for h in HEAD])).encode(), "survey.txt"),
    Case("byte-order mark", text(table(), encoding="utf-8-sig")),
    Case("UTF-16", text(table(), "\t", "utf-16"), "survey.txt"),
    Case("UTF-16 without mark", text(table(), "\t", "utf-16-le"), "survey.txt"),
    Case("Windows code page with degree signs and micro signs", text(table(["Station", "Latitude °N", "Longitude °E", "Mud <63 µm %", "Sand %", "Gravel %", "Remarks"]), encoding="cp1252"), notes=("cp1252",)),
    Case("carriage returns", text(table(), newline="\r\n")),
    Case("line breaks inside quotes", text(table(A2_6="two\nlines")), counts={"rows_read": 7}),
    Case("a first line that names the delimiter", b"sep=;\n" + text(table(change=comma), ";"), counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("a workbook", xlsx(table()), "survey.xlsx"),
    Case("an open-document sheet", ods(table()), "survey.ods"),
    Case("a workbook under a wrong name", xlsx(table()), "survey.csv"),
    Case("a text table that claims to be a workbook", text(table(), "\t"), "survey.xls"),
    Case("a hidden sheet before the data", xlsx({"Old": table(A1_3=99.0), "Data": table()}, hidden_sheets=["Old"]), "survey.xlsx", notes=("not read: Old",)),
    Case("a cover sheet", xlsx({"Cover": [["Report on grain size"], ["Laboratory", "of the bight"]], "Data": table()}), "survey.xlsx"),
    Case("a stale sheet dimension", stale_dimension(xlsx(table())), "survey.xlsx"),
    Case("hidden rows", xlsx(table(), hidden_rows=[3, 4]), "survey.xlsx", notes=("2 hidden rows",)),
    Case("empty columns", text([[x for c in r for x in (c, "")] for r in table()])),
    Case("a table that begins at D4", text([[], [], [], *[["", "", "", *r] for r in table()]])),
    Case("blank rows between", text([*table()[:3], [], ["", "", ""], *table()[3:]])),
    Case("numbers stored as text", xlsx(table(change=lambda r: [str(c) for c in r])), "survey.xlsx"),
)  # fmt: skip

TITLES = [["Survey of the bight"], ["Grain size, percent of dry weight"], []]
TABLES = (
    Case("title lines", text([*TITLES, *table()]), counts={"rows_read": 9, "rows_not_samples": 3}),
    Case("a merged header of two lines", xlsx([["Station", "Position", "", "Grain size (%)", "", "", "Remarks"], ["", "Latitude", "Longitude", "Mud", "Sand", "Gravel", ""], *rows()], merged=["B1:C1", "D1:F1", "A1:A2"]), "survey.xlsx", counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("a header of two lines without merging", text([["Station", "Position", "", "Grain size (%)", "", "", "Remarks"], ["", "Latitude", "Longitude", "Mud", "Sand", "Gravel", ""], *rows()]), counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("a second header line under one group only", text([["Station", "Latitude", "Longitude", "Grain size", "", "", "Remarks"], ["", "", "", "Mud", "Sand", "Gravel", ""], *rows()]), counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("a units row", text([["Station", "Latitude", "Longitude", "Mud", "Sand", "Gravel", "Remarks"], ["", "deg N", "deg E", "%", "%", "%", ""], *rows()]), counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("repeated header lines", text([*table()[:3], HEAD, *table()[3:5], HEAD, *table()[5:]]), counts={"rows_read": 9, "rows_not_samples": 3}),
    Case("totals and notes below", text([*table(), ["Mean", "", "", 22.0, 67.6, 10.4, ""], [], ["* wet sieved"], ["Analyst: initials"]]), counts={"rows_read": 10, "rows_not_samples": 4}),
    Case("a total between blocks", text([*table()[:4], ["Total", "", "", 48.0, 239.5, 12.5], *table()[4:]]), counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("a table of contents above that looks like a header", text([["Sample", "Date", "Depth"], ["see sheet 2"], [], *table()]), block={"header_row": 4}, counts={"rows_read": 9, "rows_not_samples": 3}),
    Case("two depths, of which the first counts", text([[*HEAD, "Depth (m)", "Depth corrected"], *[[*r, 10.5, 99] for r in rows()]]), changed=everywhere(depth_m=10.5)),
    Case("headings that only the recipe knows", text([["S", "P", "Q", "F1", "F2", "F3", "Z"], *rows()]), block={"columns": {"id": "S", "latitude": "P", "longitude": "Q", "mud": "F1", "sand": "F2", "gravel": "F3"}}),
    Case("columns in another order", text([[r[i] for i in (5, 2, 3, 0, 4, 1)] for r in table()])),
)  # fmt: skip

LANGUAGES = (
    Case("Spanish", text(table(["Estación", "Latitud", "Longitud", "Fango (%)", "Arena (%)", "Grava (%)", "Observaciones"]))),
    Case("Portuguese", text(table(["Estação", "Latitude", "Longitude", "Lama (%)", "Areia (%)", "Cascalho (%)", "Observações"]))),
    Case("French", text(table(["Échantillon", "Latitude", "Longitude", "Vase (%)", "Sable (%)", "Gravier (%)", "Remarques"]))),
    Case("German", text(table(["Probe", "Breite", "Länge", "Schlick (%)", "Sand (%)", "Kies (%)", "Bemerkungen"]), encoding="cp1252")),
    Case("Italian", text(table(["Campione", "Latitudine", "Longitudine", "Pelite (%)", "Sabbia (%)", "Ghiaia (%)", "Osservazioni"]))),
    Case("Dutch", text(table(["Monster", "Breedtegraad", "Lengtegraad", "Slib (%)", "Zand (%)", "Grind (%)", "Opmerkingen"]))),
)  # fmt: skip

COLUMNS = (
    Case("cuts that headings tell", text(table(["Station", "Latitude", "Longitude", "Mud <63 µm (%)", "Sand 63 µm-2 mm (%)", "Gravel >2 mm (%)", "Remarks"])), changed=everywhere(mud_below_mm=0.063, gravel_above_mm=2.0), atol=1e-9),
    Case("cuts at other sizes", text(table(["Station", "Latitude", "Longitude", "Fines <75 µm (%)", "Sand (%)", "Gravel >4.75 mm (%)", "Remarks"])), changed=everywhere(mud_below_mm=0.075, gravel_above_mm=4.75), notes=("its mud ends at 0.075 mm, not at 0.063 mm; DOUBT", "its gravel begins at 4.75 mm, not at 2 mm; DOUBT"), atol=1e-9),
    Case("cuts that nothing tells", text(table()), changed=everywhere(mud_below_mm=NAN, gravel_above_mm=NAN)),
    Case("silt and clay", text([["Station", "Latitude", "Longitude", "Silt %", "Clay %", "Sand %", "Gravel %"], *[[*r[:3], round(r[3] - 1, 1), 1.0, *r[4:6]] for r in rows()]]), audit=tuple((i + 2, "Silt % + Clay %", f"{round((r[3] - 1) / 100, 5):.7g} + 0.01", f"{r[3] / 100:.7g}") for i, r in enumerate(BASE))),
    Case("sand in sub-classes beside the sand", text([[*HEAD, "Fine sand %", "Coarse sand %"], *[[*r, 1.0, 2.0] for r in rows()]])),
    Case("weights beside percents", text([["Station", "Latitude", "Longitude", "Mud (g)", "Mud (%)", "Sand (g)", "Sand (%)", "Gravel (%)"], *[[*r[:3], 9.9, r[3], 8.8, r[4], r[5]] for r in rows()]])),
    Case("statistics named after parts", text([[*HEAD, "Median of the sand (mm)", "Mud colour", "Sand D50"], *[[*r, 0.2, "grey", 0.2] for r in rows()]])),
    Case("weights alone", text([["Station", "Latitude", "Longitude", "Mud (g)", "Sand (g)", "Gravel (g)"], *[[*r[:3], *(round(2.5 * v, 3) for v in r[3:6])] for r in rows()]])),
    Case("size classes", text([["Station", "Latitude", "Longitude", ">2 mm (g)", "0.5-2 mm (g)", "0.063-0.5 mm (g)", "<0.063 mm (g)"], *[[*r[:3], r[5], 10.0 if r[4] > 10 else 0.0, r[4] - 10.0 if r[4] > 10 else r[4], r[3]] for r in rows()]])),
)  # fmt: skip

LIMIT = {
    "mud": 0.0065, "sand": 0.945 * 0.9935, "gravel": 0.055 * 0.9935, "mud_low": 0.0, "mud_high": 0.01, "sand_low": 0.945 * 0.99,
    "sand_high": 0.945, "gravel_low": 0.055 * 0.9935 - 0.0005, "gravel_high": 0.055 * 0.9935 + 0.0005,
}  # fmt: skip
CELLS = (
    Case("below a limit", text(table(A3_3="<1", A3_5=5.5)), changed={"A3": LIMIT}, audit=((4, "Mud (%)", "<1", "0.0065"), (4, "mud + sand + gravel", "1.0065", "1"))),
    Case("a trace", text(table(A3_3="trace", A3_5=5.5)), changed={"A3": {"mud": 0.0025, "sand": 0.945 * 0.9975, "gravel": 0.055 * 0.9975, "mud_low": 0.0, "mud_high": 0.005}}, audit=((4, "Mud (%)", "trace", "0.0025"), (4, "mud + sand + gravel", "1.0025", "1"))),
    Case("not determined", text(table(A2_5="nd", A2_4="n.d.")), changed={"A2": {"sand": NAN, "gravel": NAN, "kind": "partial"}}, audit=((3, "Sand (%)", "n.d.", ""), (3, "Gravel (%)", "nd", ""))),
    Case("a dash", text(table(A2_5="-")), audit=((3, "Gravel (%)", "-", ""), (3, "gravel", "", "0.05"))),
    Case("a range", text(table(A2_3="25-35")), changed={"A2": {"mud_low": 0.25, "mud_high": 0.35, "sand_low": 0.6495, "sand_high": 0.6505, "gravel_low": 0.0495, "gravel_high": 0.0505}, "A1": {"mud_low": NAN, "mud_high": NAN}}, audit=((3, "Mud (%)", "25-35", "0.3"),)),
    Case("ranges whose middles miss the sum", text(table(A2_3="20-30", A2_4="60-80", A2_5="0-20")), changed={"A2": {"mud": 0.24, "sand": 0.68, "gravel": 0.08, "mud_low": 0.2, "gravel_high": 0.2}}, audit=((3, "Mud (%)", "20-30", "0.25"), (3, "Sand (%)", "60-80", "0.7"), (3, "Gravel (%)", "0-20", "0.1"), (3, "mud", "0.25", "0.24"), (3, "sand", "0.7", "0.68"), (3, "gravel", "0.1", "0.08"))),
    Case("ranges that no composition meets", text(table(A2_3="60-70", A2_4="60-80", A2_5=0)), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("parts sum to 1.2",), audit=((3, "Mud (%)", "60-70", "0.65"), (3, "Sand (%)", "60-80", "0.7"), (3, "mud", "0.65", "0.6"), (3, "sand", "0.7", "0.6"))),
    Case("about", text(table(A2_3="~30", A1_3="c. 12.5")), changed={"A2": {"mud_low": 0.24, "mud_high": 0.36}, "A1": {"mud_low": 0.1, "mud_high": 0.15}}, audit=((2, "Mud (%)", "c. 12.5", "0.125"), (3, "Mud (%)", "~30", "0.3"))),
    Case("above a limit", text(table(A4_3=">95", A4_4="", A4_5="")), changed={"A4": {"mud": 0.975, "sand": NAN, "gravel": NAN, "kind": "partial", "mud_low": 0.95, "mud_high": 1.0, "sand_low": NAN}}, audit=((5, "Mud (%)", ">95", "0.975"),)),
    Case("what a limit leaves open", text(table(A2_3="<10", A2_4=90, A2_5="")), changed={"A2": {"mud": 0.065, "sand": 0.9, "gravel": 0.035, "mud_low": 0.0, "mud_high": 0.1, "gravel_low": 0.0, "gravel_high": 0.1}}, audit=((3, "Mud (%)", "<10", "0.065"), (3, "gravel", "", "0.035"))),
    Case("a limit of what passed 2 mm", text([r[:5] for r in table(change=lambda r: [*r[:3], r[3], 99.5 if isinstance(r[3], str) else round(100 - r[3], 1), *r[5:]], A3_3="<1")]), block={"basis": "below_2mm"}, changed={r[0]: {"mud": 0.0065, "sand": 0.9935, "gravel": NAN, "kind": "partial", "mud_high": NAN} if r[0] == "A3" else {"sand": 1 - r[3] / 100, "gravel": NAN, "kind": "partial"} for r in BASE}, audit=((4, "Mud (%)", "<1", "0.0065"), (4, "mud + sand + gravel", "1.0015", "1"))),
    Case("a limit in a size class", text([["Station", "Latitude", "Longitude", ">2 mm %", "0.25-2 mm %", "0.063-0.25 mm %", "<0.063 mm %"], *[[*r[:3], r[5], 0.0, r[4], r[3] if r[0] != "A3" else "<1"] for r in rows(A3_4=99.0)]]), changed={"A3": {"mud": 0.0065 / 0.9965, "sand": 0.99 / 0.9965, "gravel": 0.0, "mud_low": 0.0, "mud_high": 0.01, "sand_low": 0.99, "sand_high": 1.0}}, audit=((4, "<0.063 mm %", "<1", "0.65"),)),
    Case("a median size beside the shares", text([[*HEAD, "D50 (µm)"], *[[*r, 250.0] for r in rows()]]), changed=everywhere(median_phi=2.0, kind="sieve"), notes=("median size in µm",)),
    Case("nothing but a median size", text([*[[*r[:6], h] for r, h in zip(table(), ["Median phi", *[""] * 6], strict=True)], ["A7", 54.2, 3.3, "", "", "", 1.5]]), changed={"A7": {"kind": "median_only", "median_phi": 1.5, "longitude": 3.3, "latitude": 54.2, "mud": NAN, "sand": NAN, "gravel": NAN}}, counts={"rows_read": 8, "rows_used": 7, "stations": 7}),
    Case("a median size whose unit its mud tells", text([[*HEAD, "Median grain size"], *[[*r, d] for r, d in zip(rows(A4_3=90.0, A4_4=10.0), [0.25, 0.125, 0.5, 0.03125, 2.0, 0.25], strict=True)]]), changed={"A3": {"median_phi": 1.0}, "A4": {"median_phi": 5.0, "mud": 0.9, "sand": 0.1}}, notes=("median size in mm, told by the mud of the same rows",)),
    Case("a median size without a unit", text([[*HEAD, "Median grain size"], *[[*r, d] for r, d in zip(rows(), [0.25, 0.125, 0.5, 1.0, 2.0, 0.25], strict=True)]]), changed=everywhere(median_phi=NAN), notes=("it may be phi or mm; DOUBT",)),
    Case("a mean size in phi", text([[*HEAD, "Mz (phi)"], *[[*r, 2.5] for r in rows()]]), changed=everywhere(median_phi=2.5), notes=("mean size, taken for the median, in phi",)),
    Case("percent signs in cells", text(table(["Station", "Latitude", "Longitude", "Mud", "Sand", "Gravel", "Remarks"], change=lambda r: [*r[:3], *(f"{v} %" for v in r[3:6]), r[6]]))),
    Case("footnote marks", text(table(A2_3="30.0*", A5_5="50 a")), audit=((3, "Mud (%)", "30.0*", "0.3"), (6, "Gravel (%)", "50 a", "0.5"))),
    Case("codes for missing", text(table(A2_5=-999, A4_5=-99.9)), audit=((3, "Gravel (%)", "-999", ""), (3, "gravel", "", "0.05"), (5, "Gravel (%)", "-99.9", ""), (5, "gravel", "", "0"))),
    Case("a range that became a date", xlsx(table(A2_3=dt.date(2024, 10, 5))), "survey.xlsx", gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("the date 2024-10-05, to which spreadsheets turn entries such as 5-10",)),
    Case("a blank part of a whole sample", text(table(A2_5="")), audit=((3, "gravel", "", "0.05"),)),
    Case("a survey in which blank is zero", text(table(A3_5="", A4_5="")), block={"blank_means": "zero"}, audit=((4, "Gravel (%)", "", "0"), (5, "Gravel (%)", "", "0"))),
    Case("fractions that the spreadsheet shows as percent", xlsx(table(change=lambda r: [*r[:3], *(v / 100 for v in r[3:6]), r[6]]), formats={"D2": "0.0%"}), "survey.xlsx", notes=("headings say percent, the sums of the rows say fractions of 1",)),
    Case("per mille", text(table(["Station", "Latitude", "Longitude", "Mud", "Sand", "Gravel", "Remarks"], change=lambda r: [*r[:3], *(10 * v for v in r[3:6]), r[6]]))),
    Case("a decimal comma in text beside numbers", xlsx(table(A2_3="30,0", A5_3="1,5")), "survey.xlsx"),
    Case("sums that need closing", text(table(A2_3=30.5)), changed={"A2": {"mud": 0.305 / 1.005, "sand": 0.65 / 1.005, "gravel": 0.05 / 1.005}}, audit=((3, "mud + sand + gravel", "1.005", "1"),)),
    # the spreadsheet library shows an error cell as an empty one
    Case("a formula's error", xlsx(table(A2_5="#DIV/0!")), "survey.xlsx", audit=((3, "gravel", "", "0.05"),)),
)  # fmt: skip

TENTH_MM = 2e-9  # degrees: positions typed to a millimetre or a ten-thousandth of a minute
POSITIONS = (
    Case("degrees and minutes with letters", text(with_place(["Latitude", "Longitude"], lambda a, o: (f"{dm(a)} N", f"{dm(o)} E"))), atol=TENTH_MM * 500),
    Case("degrees, minutes and seconds", text(with_place(["Latitude", "Longitude"], lambda a, o: (dms(a, "N"), dms(o, "E")))), atol=3e-6),
    Case("one column after ISO 6709", text(with_place(["Position"], lambda a, o: (f"+{a:.3f}+{o:07.3f}/",)))),
    Case("one column of latitude and longitude", text(with_place(["Lat/Long"], lambda a, o: (f"{a}, {o}",)))),
    Case("columns of degrees, minutes and hemisphere", text(with_place(["Lat deg", "Lat min", "N/S", "Lon deg", "Lon min", "E/W"], lambda a, o: (int(a), round((a % 1) * 60, 5), "N", int(o), round((o % 1) * 60, 5), "E"))), atol=1e-6),
    Case("metres in a stated system", text(with_place(["Easting", "Northing"], utm)), block={"crs": "EPSG:32631"}, atol=TENTH_MM * 10, notes=("UTM zone 31N",)),
    Case("metres with signs of thousands", text(with_place(["Easting", "Northing"], lambda a, o: tuple(f"{round(v):,}" for v in utm(a, o)))), block={"crs": "EPSG:32631"}, atol=1e-5),
    Case("a zone in a column", text(with_place(["Easting", "Northing", "Zone"], lambda a, o: (*utm(a, o), "31N"))), atol=TENTH_MM * 10),
    Case("metres and degrees side by side", text([[*HEAD, "Easting", "Northing"], *[[*r, 1.0, 2.0] for r in rows()]])),
    Case("longitudes from 0 to 360", text(with_place(["Latitude", "Longitude"], lambda a, o: (a, 360.0 - o))), changed={r[0]: {"longitude": -r[2]} for r in BASE}),
    Case("a hemisphere that only the recipe knows", text(table()), block={"hemisphere": "SW"}, changed={r[0]: {"longitude": -r[2], "latitude": -r[1]} for r in BASE}),
    Case("position zero", text(table(A2_1=0, A2_2=0)), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("position 0, 0, which stands for none",)),
    Case("seventy minutes", text(table(A2_1="54 71.0 N")), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("minutes of 60 or more",)),
    Case("a lone O", text(table(A2_2="3 12.0 O")), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("west in some languages and east in others",)),
    Case("another geographic system", text(table()), block={"crs": "EPSG:4258"}, notes=("ETRS89",), atol=1e-8),
    Case("plain X and Y of a stated system", text(with_place(["X", "Y"], utm)), block={"crs": "EPSG:32631"}, atol=TENTH_MM * 10),
)  # fmt: skip

FATES = (
    Case("a sum of 137 percent", text(table(A2_5=42.0)), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("parts sum to 1.37, expected 1 ± 0.02",)),
    Case("no recovery", text([*table(), ["A7", 54.2, 3.3, "", "", "", "no recovery, rock"], ["A8", 54.2, 3.3, "", "", "", "grab failed twice"]]), changed={"A7": {"kind": "hard_ground", "longitude": 3.3, "latitude": 54.2, "mud": NAN, "sand": NAN, "gravel": NAN}, "A8": {"kind": "hard_ground", "longitude": 3.3, "latitude": 54.2, "mud": NAN, "sand": NAN, "gravel": NAN}}, counts={"rows_read": 9, "rows_evidence": 2}),
    Case("hard ground noted in a column of shares", text([*table(), ["A7", 54.2, 3.3, "rock", "", "", ""]]), changed={"A7": {"kind": "hard_ground", "longitude": 3.3, "latitude": 54.2, "mud": NAN, "sand": NAN, "gravel": NAN}}, counts={"rows_read": 8, "rows_evidence": 1}),
    Case("stiff clay and a lost jar", text([*table(), ["A7", 54.2, 3.3, "", "", "", "stiff clay"], ["A8", 54.3, 3.3, "", "", "", "jar lost"]]), counts={"rows_read": 9, "rows_set_aside": 2}, aside=("old, firm ground", "no share of mud, sand or gravel")),
    Case("words where nothing was measured", text([*table(), ["A7", 54.2, 3.3, "", "", "", "muddy sand"]]), changed={"A7": {"kind": "description", "described_class": "mS", "longitude": 3.3, "latitude": 54.2, "mud": NAN, "sand": NAN, "gravel": NAN}}, counts={"rows_read": 8, "rows_used": 7, "stations": 7}, audit=((8, "Remarks", "muddy sand", "mS"),)),
    Case("three grabs at one place", text([*table(), ["A1b", 54.101, 3.201, 22.5, 70.0, 7.5, ""], ["A1c", 54.101, 3.201, 17.5, 75.0, 7.5, ""]]), changed={"A1": {"mud": 0.175, "sand": 0.75, "repeats": 3, "repeat_sd_mud": 0.05}}, counts={"rows_read": 9, "rows_merged": 2}),
    Case("mud alone", text(table(A2_4="", A2_5="")), changed={"A2": {"sand": NAN, "gravel": NAN, "kind": "partial"}}),
    Case("sand alone", text(table(A2_3="", A2_5="")), changed={"A2": {"mud": NAN, "gravel": NAN, "kind": "partial"}}),
    Case("a laboratory that saw what passed 2 mm", text([r[:5] for r in table(change=lambda r: [*r[:3], r[3], round(100 - r[3], 1), *r[5:]])]), block={"basis": "below_2mm"}, changed={r[0]: {"sand": 1 - r[3] / 100, "gravel": NAN, "kind": "partial"} for r in BASE}),
    Case("slices of a core", text([[*HEAD, "Sample interval"], *[[*r, "0-2 cm"] for r in rows()], ["A7", 54.2, 3.3, 50, 50, 0, "", "20-22cm"]]), counts={"rows_read": 8, "rows_set_aside": 1}, aside=("begins 0.2 m below the surface of the bed",)),
    Case("shares without a place", text([*table(), ["A7", "", "", 50, 50, 0, ""]]), counts={"rows_read": 8, "rows_set_aside": 1}, aside=("no position",)),
    Case("one id at two places", text([*table(), ["A1", 54.3, 3.4, 12.5, 80.0, 7.5, ""]]), counts={"rows_read": 8, "rows_used": 7, "stations": 7}),
    Case("a negative share", text(table(A2_5=-5.0, A2_4=75.0)), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("a negative share",)),
    Case("mud that is not its silt and clay", text([[*HEAD, "Silt %", "Clay %"], *[[*r, r[3] - 1.0, 1.0] for r in rows(A2_3=30.0)][:1], *[[*r, r[3] + 9.0, 1.0] for r in rows()[1:2]], *[[*r, r[3] - 1.0, 1.0] for r in rows()[2:]]]), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("mud 0.3 is not silt + clay 0.4",)),
)  # fmt: skip

POSITIONS_OF_ALL = [r[:3] for r in table()]
LAYOUTS = (
    Case("stacked blocks", text([*table()[:4], [], ["Second leg"], HEAD, *table()[4:]]), counts={"rows_read": 9, "rows_not_samples": 3}),
    Case("a further block with its columns in another order", text([*table()[:4], [], *[[r[i] for i in (0, 5, 4, 3, 2, 1, 6)] for r in [HEAD, *table()[4:]]]]), counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("a laser sheet", text(table()), block={"method": "laser"}, changed=everywhere(kind="laser")),
    Case("a table turned into a form with blank lines and a key below", text([*table(), [], ["Key:"], ["nd", "not determined"], ["tr", "trace"]]), counts={"rows_read": 10, "rows_not_samples": 4}),
    Case("samples side by side", text([list(c) for c in zip(*table(), strict=True)])),
    Case("samples side by side below a title", xlsx([["Report of the bight's laboratory"], [], *[list(c) for c in zip(*table(), strict=True)]]), "survey.xlsx"),
    Case(
        "sieve sizes down the rows, places on another sheet",
        xlsx({"Places": POSITIONS_OF_ALL, "Sieves": [["Sieve (mm), g retained", *[r[0] for r in BASE]], [2, *[r[5] for r in BASE]], [0.25, *[20.0] * 6], [0.063, *[r[4] - 20.0 for r in BASE]], ["pan", *[r[3] for r in BASE]]]}),
        "survey.xlsx",
        notes=("samples stand side by side", "single sizes read as what was retained"),
    ),
    Case("a scale of bare sizes", text([["Station", "Latitude", "Longitude", "Sieve mm:", 2, 0.25, 0.063, "pan"], *[[*r[:3], "", r[5], 20.0, r[4] - 20.0, r[3]] for r in BASE]])),
)  # fmt: skip


def certificate(row: Row, table: Sequence[Row], place: bool = True) -> list[Row]:
    """One sample as a laboratory's form: labels with values, and a table of sizes under them."""
    where = [["Latitude", row[1], "", "Longitude:", row[2]]] if place else []
    return [
        ["Grain size certificate"],
        ["Sample:", row[0]],
        *where,
        ["Analyst: initials"],
        [],
        *table,
        ["Total", 100.0],
    ]


def sieves(row: Row, tare: float | None = None) -> list[Row]:
    """Grams on each sieve, gross and tare where there is a tare."""
    grams = [[2, row[5]], [0.25, 0.2 * row[4]], [0.063, 0.8 * row[4]], ["Pan", row[3]]]
    if tare is None:
        return [["Sieve (mm)", "Retained (g)", "Cumulative (%)"], *[[s, round(g, 3), 1.0] for s, g in grams]]
    return [
        ["Sieve (mm)", "Gross (g)", "Tare (g)"],
        *[[s, round(g + tare + k, 3), tare + k] for k, (s, g) in enumerate(grams)],
    ]


ONE_EACH = {"rows_read": 6, "rows_not_samples": 0}
WIDE = ["Station", "Latitude", "Longitude"]
FORMS = (
    Case("a certificate on each sheet", xlsx({r[0]: certificate(r, sieves(r)) for r in BASE}), "survey.xlsx", counts=ONE_EACH, notes=("6 certificates, each on a sheet of its own",), atol=1e-9),
    Case("certificates with gross weights and tares", xlsx({r[0]: certificate(r, sieves(r, 112.5)) for r in BASE}), "survey.xlsx", counts=ONE_EACH, notes=("4 size columns less their tare",), atol=1e-9),
    Case("certificates beside a sheet of places", xlsx({"Places": POSITIONS_OF_ALL, **{r[0]: certificate(r, sieves(r), place=False) for r in BASE}}), "survey.xlsx", counts=ONE_EACH, notes=("certificates",), atol=1e-9),
    Case("certificates without an id, on sheets that have one", xlsx({r[0]: [["Latitude", r[1]], ["Longitude", r[2]], ["Mud (%)", r[3]], ["Sand (%)", r[4]], ["Gravel (%)", r[5]]] for r in BASE}), "survey.xlsx", counts=ONE_EACH),
    Case("certificates stacked", text([line for r in BASE for line in [*certificate(r, sieves(r)), []]]), counts=ONE_EACH, notes=("6 certificates stacked on one sheet; certificate 1 begins in row 1",), atol=1e-9),
    Case("certificates stacked without a blank line between", text([line for r in BASE for line in [["Station no", r[0]], ["Lat", r[1]], ["Lon", r[2]], ["Depth", 12, "m"], ["Mud", r[3], "%"], ["Sand", r[4], "%"], ["Gravel", r[5], "%"]]]), changed=everywhere(depth_m=12.0), counts=ONE_EACH),
    Case("certificates of classes in µm and percent", xlsx({r[0]: certificate(r, [["Size class (µm)", "Percent (%)"], [">2000", r[5]], ["250-2000", 0.0], ["63-250", r[4]], ["<63", r[3]]]) for r in BASE}), "survey.xlsx", counts=ONE_EACH, atol=1e-9),
    Case("certificates with what passed each sieve", xlsx({r[0]: certificate(r, [["Sieve (mm)", "Passing (%)"], [2, 100 - r[5]], [0.25, 100 - r[5]], [0.063, r[3]]]) for r in BASE}), "survey.xlsx", counts=ONE_EACH, atol=1e-9),
    Case("a layout that the recipe says", text([list(c) for c in zip(*table(), strict=True)]), block={"layout": "columns"}, notes=("samples stand side by side",)),
    Case("rows that the recipe leaves out", text([*table()[:3], ["A9", 54.2, 3.3, 50, 50, 0, ""], *table()[3:]]), block={"skip": [4]}, counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("a line above the header that the recipe leaves out", text([["Station", "Latitude", "Longitude", "Mud", "Sand", "Gravel", "as agreed"], *table()]), block={"skip": [1]}, counts={"rows_read": 8, "rows_not_samples": 2}),
    Case("gross and tare of each size", text([[*WIDE, ">2 mm gross (g)", ">2 mm tare (g)", "0.063-2 mm gross (g)", "0.063-2 mm tare (g)", "<0.063 mm gross (g)", "<0.063 mm tare (g)"], *[[*r[:3], r[5] + 80, 80, r[4] + 81.5, 81.5, r[3] + 79, 79] for r in BASE]]), notes=("3 size columns less their tare",), atol=1e-9),
    Case("gross and tare of the parts", text([[*WIDE, *(f"{p} {w} (g)" for p in ("Mud", "Sand", "Gravel") for w in ("gross", "tare"))], *[[*r[:3], r[3] + 50, 50, r[4] + 51, 51, r[5] + 52, 52] for r in BASE]]), notes=('less its tare "Sand tare (g)"',), atol=1e-9),
    Case("fines weighed on a split", text([[*WIDE, "Split factor <2 mm", ">2 mm (g)", "0.25-2 mm (g)", "0.063-0.25 mm (g)", "<0.063 mm (g)"], *[[*r[:3], s, r[5], 0.0, r[4] / f, r[3] / f] for r, (s, f) in zip(BASE, [("1/4", 4), ("4", 4), (0.25, 4), (8, 8), ("", 1), (1, 1)], strict=True)]]), notes=("classes below 2 mm times the split factor",), atol=1e-9),
    Case("sieves and pan weighed on a split", text([[*WIDE, "Split", "2 mm (g)", "0.25 mm (g)", "0.063 mm (g)", "pan (g)"], *[[*r[:3], 8, r[5], 0.0, r[4] / 8, r[3] / 8] for r in BASE]]), block={"split_below_mm": 2.0}, notes=("classes below 2 mm times the split factor",), atol=1e-9),
    Case("a split of which nothing says the size", text([[*WIDE, "Split factor", ">2 mm (g)", "0.25-2 mm (g)", "0.063-0.25 mm (g)", "<0.063 mm (g)"], *[[*r[:3], 8 if r[0] == "A2" else 1, r[5], 0.0, r[4], r[3]] for r in BASE]]), gone=("A2",), counts={"rows_used": 5, "rows_set_aside": 1, "stations": 5}, aside=("a split factor of 8, and nothing says below which size; say split_below_mm",), atol=1e-9),
    Case("sub-classes as percent of the sand", text([[*WIDE, ">2 mm (%)", "0.5-2 mm (% of sand)", "0.063-0.5 mm (% of sand)", "<0.063 mm (%)"], *[[*r[:3], r[5], 40.0, 60.0, r[3]] for r in BASE]]), notes=("2 size columns are percent of the sand",), atol=1e-9),
    Case("sub-classes as percent of the sand beside the sand", text([[*HEAD, "Fine sand (% of sand)", "63-250 µm (% of sand)", "250-2000 µm (% of sand)", ">2000 µm (% of gravel)"], *[[*r, 10.0, 60.0, 40.0, 100.0] for r in rows()]])),
)  # fmt: skip

DATES = (
    Case("day before month", text([[*HEAD, "Date"], *[[*r, f"{d}/05/1987"] for r, d in zip(rows(), range(11, 17), strict=True)]]), changed={f"A{k + 1}": {"date": f"1987-05-{11 + k}"} for k in range(6)}),
    Case("month before day", text([[*HEAD, "Date"], *[[*r, f"5/{d}/87"] for r, d in zip(rows(), range(11, 17), strict=True)]]), changed={f"A{k + 1}": {"date": f"1987-05-{11 + k}"} for k in range(6)}),
    Case("an order that nothing tells", text([[*HEAD, "Date"], *[[*r, "05/06/1987"] for r in rows()]]), changed=everywhere(date=""), notes=("the order of day and month cannot be told",)),
    Case("months in words", text([[*HEAD, "Date"], *[[*r, d] for r, d in zip(rows(), ["5 May 1987", "6. Mai 1987", "7 mayo 1987", "8-MAY-87", "May 9, 1987", "10 mai 1987"], strict=True)]]), changed={f"A{k + 1}": {"date": f"1987-05-{5 + k:02d}"} for k in range(6)}),
    # the 1900 date system: serial 36526 is 2000-01-01 (general knowledge of the format, checked with openpyxl)
    Case("dates of a workbook", xlsx([[*HEAD, "Date"], *[[*r, dt.datetime(2000, 1, 1 + k)] for k, r in enumerate(rows())]]), "survey.xlsx", changed={f"A{k + 1}": {"date": f"2000-01-0{1 + k}"} for k in range(6)}),
)  # fmt: skip

TOGETHER = (
    Case(
        "everything at once",
        xlsx(
            [
                ["Bight survey", "", "", "", "", "", "", ""],
                [],
                ["Estación", "Posición", "", "Granulometría", "", "", "", "Observaciones"],
                ["", "Latitud", "Longitud", "Fango", "Arena", "Grava", "Profundidad", ""],
                ["", "", "", "%", "%", "%", "m", ""],
                *[[r[0], f"{dm(r[1])} N", f"{dm(r[2])} E", *(str(v).replace(".", ",") for v in r[3:6]), -12, ""] for r in BASE],
                ["A7", "54 12 N", "3 18 E", "", "", "", -3, "roca"],
                ["Media", "", "", "22", "67,6", "10,4", "", ""],
                ["* muestras húmedas"],
            ],
            merged=["B3:C3", "D3:F3", "A1:H1"],
        ),
        "survey.xlsx",
        changed={**everywhere(depth_m=12.0), "A7": {"kind": "hard_ground", "longitude": 3.3, "latitude": 54.2, "mud": NAN, "sand": NAN, "gravel": NAN}},
        counts={"rows_read": 13, "rows_evidence": 1, "rows_not_samples": 6},
        notes=("heights turned to depths",),
        atol=1e-6,
    ),
)  # fmt: skip

CASES = (*FILES, *TABLES, *LANGUAGES, *COLUMNS, *CELLS, *POSITIONS, *FATES, *LAYOUTS, *FORMS, *DATES, *TOGETHER)
