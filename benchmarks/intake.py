"""Seconds and memory of reading large spreadsheets: a csv table of 600,000 rows, a workbook of 200,000.

Each file is read in a process of its own, so that its peak memory is its own; a workbook's helper process counts too.
The rows are of one invented survey with limits, words, hard ground, repeats and totals among them. Half the rows are read as
well, to show that the cost is linear. Seconds of work are the program's own on the processor, which others on a busy machine do not lengthen.

    python -m benchmarks.intake [--csv 600000] [--xlsx 200000]
"""

from __future__ import annotations

import argparse
import csv
import json
import subprocess
import sys
import tempfile
import zipfile
from collections.abc import Iterator
from pathlib import Path
from typing import Any
from xml.sax.saxutils import escape

import numpy as np

HEAD = ["Station", "Date", "Latitude", "Longitude", "Depth (m)", "Mud (%)", "Sand (%)", "Gravel (%)", "Remarks"]
READ = """
import json, resource, sys, time
from texture.recipe import Recipe
from texture.stations import read_samples
target = {"bounds": [0.0, 50.0, 10.0, 60.0], "cell_size": 0.1, "crs": "EPSG:4326"}
start, worked = time.perf_counter(), time.process_time()
stations = read_samples(Recipe.model_validate({"samples": [{"file": sys.argv[1]}], "target": target}))
seconds, worked = time.perf_counter() - start, time.process_time() - worked
peak = [resource.getrusage(who).ru_maxrss / 2**20 for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)]
print(json.dumps({"seconds": seconds, "worked": worked, "own_gib": peak[0], "helper_gib": peak[1], **stations.counts}))
"""


def rows(count: int, seed: int = 1) -> Iterator[list[Any]]:
    """Rows as people type them: one in fifty is anything but plain."""
    rng = np.random.default_rng(seed)
    lon, lat = 2.0 + 4.0 * rng.random(count), 53.0 + 3.0 * rng.random(count)
    mud, gravel = 100.0 * rng.beta(0.7, 2.0, count), 10.0 * rng.beta(0.4, 3.0, count)
    mud = np.minimum(mud, 90.0)
    odd = rng.integers(0, 300, count)
    for i in range(count):
        m, g = round(float(mud[i]), 1), round(float(gravel[i]), 1)
        cells: list[Any] = [m, round(100.0 - m - g, 1), g, ""]
        if odd[i] == 0:
            cells = ["<1", round(99.5 - g, 1), g, ""]
        elif odd[i] == 1:
            cells = ["", "", "", "no recovery, rock"]
        elif odd[i] == 2:
            cells = ["", "", "", "muddy sand"]
        elif odd[i] == 3:
            cells = ["5-10", round(92.5 - g, 1), g, "range"]
        elif odd[i] == 4:
            cells = [m, round(100.0 - m - g, 1), "trace", ""]
        elif odd[i] == 5:
            cells = [m, round(137.0 - m - g, 1) if m > 37.0 else 30.0, g, "sums to anything"]
        day = f"{1980 + i % 40}-{1 + i % 12:02d}-{1 + i % 28:02d}"
        yield [f"S{i:06d}", day, round(float(lat[i]), 5), round(float(lon[i]), 5), round(20.0 + i % 60, 1), *cells]


def write_csv(path: Path, count: int) -> None:
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream)
        writer.writerow(HEAD)
        writer.writerows(rows(count))


def write_xlsx(path: Path, count: int) -> None:
    """A workbook written cell by cell, for spreadsheet libraries take minutes over one of this size."""
    types = '<?xml version="1.0"?><Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types"><Default Extension="rels" ContentType="application/vnd.openxmlformats-package.relationships+xml"/><Default Extension="xml" ContentType="application/xml"/><Override PartName="/xl/workbook.xml" ContentType="application/vnd.openxmlformats-officedocument.spreadsheetml.sheet.main+xml"/><Override PartName="/xl/worksheets/sheet1.xml" ContentType="application/vnd.openxmlformats-officedocument.spreadsheetml.worksheet+xml"/></Types>'
    office = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
    links = '<?xml version="1.0"?><Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships"><Relationship Id="rId1" Type="{}" Target="{}"/></Relationships>'
    main = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
    book = f'<?xml version="1.0"?><workbook xmlns="{main}" xmlns:r="{office}"><sheets><sheet name="Data" sheetId="1" r:id="rId1"/></sheets></workbook>'
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED, compresslevel=1) as pack:
        pack.writestr("[Content_Types].xml", types)
        pack.writestr("_rels/.rels", links.format(f"{office}/officeDocument", "xl/workbook.xml"))
        pack.writestr("xl/workbook.xml", book)
        pack.writestr("xl/_rels/workbook.xml.rels", links.format(f"{office}/worksheet", "worksheets/sheet1.xml"))
        with pack.open("xl/worksheets/sheet1.xml", "w") as sheet:
            sheet.write(f'<?xml version="1.0"?><worksheet xmlns="{main}"><sheetData>'.encode())
            for number, row in enumerate([HEAD, *rows(count)], start=1):
                sheet.write(
                    f'<row r="{number}">{"".join(_cell(c, k, number) for k, c in enumerate(row))}</row>'.encode()
                )
            sheet.write(b"</sheetData></worksheet>")


def _cell(value: Any, column: int, row: int) -> str:
    place = f"{chr(65 + column)}{row}"
    if value == "":
        return ""
    if isinstance(value, str):
        return f'<c r="{place}" t="inlineStr"><is><t>{escape(value)}</t></is></c>'
    return f'<c r="{place}"><v>{value}</v></c>'


def measure(path: Path) -> dict[str, float]:
    run = subprocess.run([sys.executable, "-c", READ, str(path)], capture_output=True, text=True, check=True)
    return dict(json.loads(run.stdout))


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--csv", type=int, default=600_000, help="rows of the text table")
    parser.add_argument("--xlsx", type=int, default=200_000, help="rows of the workbook")
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        for write, name, count in ((write_csv, "survey.csv", asked.csv), (write_xlsx, "survey.xlsx", asked.xlsx)):
            for part in (count // 2, count):
                path = Path(folder) / name
                write(path, part)
                found = measure(path)
                print(
                    f"{name:12} {part:8,} rows  {found['seconds']:6.1f} s ({found['worked']:.1f} s of work)  {found['own_gib']:.2f} GiB"
                    f" + {found['helper_gib']:.2f} GiB in a helper  {found['stations']:,.0f} stations, "
                    f"{found['rows_set_aside']:,.0f} set aside, {found['rows_evidence']:,.0f} hard ground"
                )


if __name__ == "__main__":
    main()
