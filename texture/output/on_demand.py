"""Variables whose values are worked out when they are written, so that only one of them is in memory at a time."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import DTypeLike, NDArray
from xarray.backends import BackendArray
from xarray.core import indexing

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["OnDemand", "in_memory", "is_on_demand", "on_demand"]


class OnDemand(BackendArray):
    """An array that `make` makes anew whenever somebody asks for values.

    Parameters
    ----------
    make : callable
        Returns the whole array.
    shape : tuple of int
    dtype : numpy dtype
    """

    def __init__(self, make: Callable[[], NDArray[Any]], shape: tuple[int, ...], dtype: DTypeLike) -> None:
        self.make, self.shape, self.dtype = make, shape, np.dtype(dtype)

    def __getitem__(self, key: Any) -> Any:
        return indexing.explicit_indexing_adapter(key, self.shape, indexing.IndexingSupport.BASIC, self._some)

    def _some(self, key: tuple[Any, ...]) -> NDArray[Any]:
        return np.asarray(self.make().reshape(self.shape)[key], dtype=self.dtype)


def on_demand(
    dims: Sequence[str], make: Callable[[], NDArray[Any]], shape: tuple[int, ...], dtype: DTypeLike, attributes: Any
) -> xr.Variable:
    """Return a variable of xarray that keeps nothing in memory."""
    import xarray as xr

    return xr.Variable(tuple(dims), indexing.LazilyIndexedArray(OnDemand(make, shape, dtype)), attributes)


def is_on_demand(variable: xr.Variable) -> bool:
    """Tell whether a variable's values are still to be worked out."""
    return not variable._in_memory


def in_memory(dataset: xr.Dataset) -> xr.Dataset:
    """Work out every variable that is still to be, for changes to be made in them."""
    made = {
        name: variable.copy(data=np.array(variable.values))
        for name, variable in dataset.variables.items()
        if is_on_demand(variable)
    }
    for variable in made.values():
        variable.encoding = {}
    return dataset.assign(made)
