"""Small files made on the spot, and recipes that read them; shared by the tests of this folder."""

from pathlib import Path
from typing import Any

from texture.recipe import Recipe

# Six stations of an invented survey, exact in percent; many tests change one thing about them.
HEADER = ["Station", "Latitude", "Longitude", "Mud (%)", "Sand (%)", "Gravel (%)", "Remarks"]
ROWS: list[list[Any]] = [
    ["A1", 54.101, 3.201, 12.5, 80.0, 7.5, ""],
    ["A2", 54.112, 3.212, 30.0, 65.0, 5.0, ""],
    ["A3", 54.123, 3.223, 5.5, 94.5, 0.0, ""],
    ["A4", 54.134, 3.234, 60.0, 40.0, 0.0, ""],
    ["A5", 54.145, 3.245, 1.0, 49.0, 50.0, "shelly"],
    ["A6", 54.156, 3.256, 22.2, 77.7, 0.1, ""],
]


def recipe_for(*blocks: dict[str, Any], **settings: Any) -> Recipe:
    target = {"bounds": [0.0, 50.0, 10.0, 60.0], "cell_size": 0.1, "crs": "EPSG:4326"}
    return Recipe.model_validate({"samples": list(blocks), "target": target, **settings})


def as_csv(rows: list[list[Any]], delimiter: str = ",") -> str:
    import csv
    import io

    stream = io.StringIO()
    csv.writer(stream, delimiter=delimiter, lineterminator="\n").writerows(rows)
    return stream.getvalue()


def write_xlsx(path: Path, sheets: dict[str, list[list[Any]]], merged: tuple[str, ...] = ()) -> None:
    import openpyxl

    book = openpyxl.Workbook()
    book.remove(book.active)
    for name, rows in sheets.items():
        sheet = book.create_sheet(name)
        for row in rows:
            sheet.append([None if c == "" else c for c in row])
        for cells in merged:
            sheet.merge_cells(cells)
    book.save(path)
