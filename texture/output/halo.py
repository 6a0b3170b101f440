"""Rows and columns of padding around the grid, for models whose arrays have them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    import xarray as xr
    from numpy.typing import NDArray

__all__ = ["pad", "unpad"]


def pad(
    dataset: xr.Dataset, dims: tuple[str, ...], cells: int, fill: Literal["copy", "land"], places: set[str]
) -> xr.Dataset:
    """Pad every variable that lies on the cells.

    Parameters
    ----------
    dataset : xarray.Dataset
        Under our own names.
    dims : tuple of str
        The dimensions of the cells, rows and columns.
    cells : int
        Added on each side.
    fill : {"copy", "land"}
        The nearest cell's values; or land: no water, evidence "not in the map", measured values NaN.
    places : set of str
        Coordinates and their bounds: these run on at the step that the outermost two cells have.

    Returns
    -------
    xarray.Dataset
    """
    import xarray as xr

    made: dict[str, xr.Variable] = {}
    for key, variable in dataset.variables.items():
        name, along = str(key), [d for d in variable.dims if d in dims]
        if not along:
            made[name] = variable
            continue
        values = variable.values
        if name in places:
            for dim in along:
                turn = 360.0 if "longitude" in name else None
                values = _run_on(values, variable.dims.index(dim), cells, turn)
        else:
            width = [(cells, cells) if d in along else (0, 0) for d in variable.dims]
            if fill == "copy":
                values = np.pad(values, width, mode="edge")
            else:
                values = np.pad(values, width, constant_values=np.nan if values.dtype.kind == "f" else 0)
        made[name] = xr.Variable(variable.dims, values, variable.attrs, encoding=dict(variable.encoding))
    return xr.Dataset(made, attrs=dataset.attrs).set_coords(list(dataset.coords))


def _run_on(values: NDArray[np.float64], axis: int, cells: int, turn: float | None) -> NDArray[np.float64]:
    """Continue a coordinate on both sides; longitudes take the short way around."""
    front = np.moveaxis(values, axis, 0)

    def outward(edge: NDArray[np.float64], inner: NDArray[np.float64]) -> list[NDArray[np.float64]]:
        step = edge - inner
        if turn is not None:
            step = (step + turn / 2.0) % turn - turn / 2.0
        return [edge + step * i for i in range(1, cells + 1)]

    second = min(1, front.shape[0] - 1)
    before, after = outward(front[0], front[second]), outward(front[-1], front[-1 - second])
    return np.moveaxis(np.concatenate([before[::-1], front, after]), 0, axis)


def unpad(dataset: xr.Dataset, dims: tuple[str, ...], cells: int) -> xr.Dataset:
    """Take the padding off again."""
    return dataset.isel({dim: slice(cells, -cells) for dim in dims if dim in dataset.dims})
