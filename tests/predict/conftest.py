"""The meuse samples, read from an installed package, and small helpers."""

from pathlib import Path
from typing import NamedTuple

import numpy as np
import pytest


class Meuse(NamedTuple):
    points: np.ndarray
    log_zinc: np.ndarray
    root_distance: np.ndarray


@pytest.fixture(scope="session")
def meuse() -> Meuse:
    """155 flood-plain samples, in file order (the data set that the gstat and sp documentation works with)."""
    skgstat = pytest.importorskip("skgstat")
    file = Path(skgstat.__file__).parent / "data" / "samples" / "meuse.txt"
    if not file.exists():
        pytest.skip("this scikit-gstat carries no meuse.txt")
    with file.open() as handle:
        names = handle.readline().replace('"', "").replace("\t", ",").strip().split(",")
        rows = [line.replace('"', "").replace("\t", ",").strip().split(",") for line in handle]
    table = {name: [row[i] for row in rows] for i, name in enumerate(names)}
    column = {name: np.array(table[name], dtype=float) for name in ("x", "y", "zinc", "dist")}
    return Meuse(np.column_stack([column["x"], column["y"]]), np.log(column["zinc"]), np.sqrt(column["dist"]))
