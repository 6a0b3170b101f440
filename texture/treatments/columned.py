"""What learning and kriging ask of anything that has columns: the treatments, and a quantity that is one column by itself."""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from texture.observations import Observations

__all__ = ["Columned"]


class Columned(Protocol):
    """Columns of numbers that stations have, each with its noise."""

    @property
    def label(self) -> str:
        """What it is in a few words, for tables."""
        ...

    @property
    def column_names(self) -> tuple[str, ...]:
        """A formula for each column that is kriged."""
        ...

    def columns(self, observations: Observations) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Values and noise variances of the stations, shapes (n, k); NaN where a station says nothing of a column."""
        ...
