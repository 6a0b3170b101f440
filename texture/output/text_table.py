"""The bed as plain text: one row for each cell, in the grid's own order."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from texture.output.tables import write_csv

if TYPE_CHECKING:
    import pandas as pd
    import xarray as xr

__all__ = ["cell_table", "write_cells"]


def cell_table(bed: xr.Dataset, cells: tuple[str, ...]) -> pd.DataFrame:
    """Lay every variable that is on the cells out in columns.

    Parameters
    ----------
    bed : xarray.Dataset
        Under our names, or the user's.
    cells : tuple of str
        Its dimensions of cells, rows before columns.

    Returns
    -------
    DataFrame
        First the cell's row and column (or its number, where there are none), from 1, then the variables in the file's
        order; those along rows or columns alone, such as x and y, are repeated. A variable with
        further dimensions has a column for each step along them, `class_fraction_mud_1`: the class by its name,
        all others by their number from 1.
    """
    import pandas as pd

    shape = tuple(bed.sizes[d] for d in cells)
    words = ("row_number", "column_number") if len(cells) == 2 else ("cell_number",)
    index = np.indices(shape, dtype=np.int64)
    columns: dict[str, np.ndarray] = {word: i.ravel() + 1 for word, i in zip(words, index, strict=True)}
    labels = {d: [str(i + 1) for i in range(length)] for d, length in bed.sizes.items()}
    for variable in bed.variables.values():
        if variable.ndim == 1 and variable.dtype.kind in "OU":  # names stand for their dimension
            labels[variable.dims[0]] = [str(v) for v in variable.values]
    for name, variable in bed.variables.items():
        if variable.ndim == 1 and variable.dims[0] in cells and len(cells) > 1:
            columns[str(name)] = variable.values[index[cells.index(str(variable.dims[0]))].ravel()]
        if not set(cells) <= set(variable.dims) or variable.dtype.kind not in "fiu":
            continue
        others = [d for d in variable.dims if d not in cells]
        if "corner" in others:
            continue
        values = variable.transpose(*others, *cells).values
        for at in np.ndindex(*values.shape[: len(others)]):
            steps = [labels[d][i] for d, i in zip(others, at, strict=True) if variable.sizes[d] > 1]
            columns["_".join([str(name), *steps])] = values[at].ravel()
    return pd.DataFrame(columns)


def write_cells(path: Path, bed: xr.Dataset, cells: tuple[str, ...]) -> None:
    """Write `cell_table` as CSV; blank where there is no value."""
    write_csv(path, cell_table(bed, cells))
