"""Workbooks (xlsx, xls, ods): cells as they are, read under guard in a process of their own."""

from __future__ import annotations

import pickle
import subprocess
import sys
from pathlib import Path
from typing import Any

from texture.errors import SampleError
from texture.stations.extent import Extent, scan_extent
from texture.stations.files import Sheet

__all__ = ["read_workbook"]

CHILD = Path(__file__).with_name("workbook_child.py")
MEMORY_BYTES = 2**30  # hostile files are refused within 1 GiB; honest large ones get more by their cells
BYTES_PER_CELL = 250  # twice what was measured: 0.28 GB for a mixed sheet of 200,000 × 12 cells
MEMORY_MOST_BYTES = 2 * 2**30
SECONDS = 10.0
SECONDS_PER_MILLION_CELLS = 20.0


def read_workbook(path: Path) -> list[Sheet]:
    """Read every worksheet of a workbook.

    Raises
    ------
    SampleError
        If the file is damaged, locked by a password, is not a workbook, or holds cells so far apart that
        the rectangle between them cannot be read.
    """
    extent = scan_extent(path)
    answer = _ask_child(path, extent)
    if "error" in answer:
        kind, text = answer["error"]
        raise _sorry(path, kind, text)
    return [
        Sheet(
            path.name,
            s["name"],
            s["rows"],
            tuple(s["merged"]),
            extent.hidden_rows.get(s["name"], 0),
            s["hidden"],
        )
        for s in answer["sheets"]
    ]


def _ask_child(path: Path, extent: Extent) -> dict[str, Any]:
    memory = min(MEMORY_BYTES + BYTES_PER_CELL * extent.cells, MEMORY_MOST_BYTES)
    seconds = SECONDS + SECONDS_PER_MILLION_CELLS * extent.cells / 1e6
    command = [sys.executable, "-I", str(CHILD), str(path.resolve()), str(memory)]
    try:
        run = subprocess.run(command, capture_output=True, timeout=seconds, check=False)
    except subprocess.TimeoutExpired:
        return {"error": ("time", f"{seconds:.0f} s")}
    if run.returncode != 0 or not run.stdout:
        return {"error": ("memory" if run.returncode < 0 else "crash", "")}
    try:
        answer: dict[str, Any] = pickle.loads(run.stdout)  # our own child's answer, not the user's file
    except (pickle.UnpicklingError, EOFError, MemoryError):
        return {"error": ("memory", "")}
    return answer


def _sorry(path: Path, kind: str, text: str) -> SampleError:
    if kind == "password":
        return SampleError(f"{path.name}: the workbook is locked by a password; save an unlocked copy")
    if kind == "memory":
        return SampleError(
            f"{path.name}: its sheets claim more cells than can be read; "
            "copy the table alone into a new workbook, or save the sheet as csv"
        )
    if kind == "time":
        return SampleError(f"{path.name}: not read within {text}; save the sheet as csv")
    return SampleError(
        f"{path.name}: not a readable workbook ({text or kind}); open it in a spreadsheet program and save it again as xlsx"
    )
