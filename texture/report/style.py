"""One look for every figure: colours, fonts and colour maps, all readable without colour vision."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, cast

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["INK", "LAND", "PART_MAP", "QUIET", "STRONG", "new_figure", "styled"]

INK = "#22303a"
QUIET = "#8a969e"
STRONG = "#b0413e"
LAND = "#d9d6cf"
PART_MAP = "batlow"  # of cmcrameri: perceptually even, safe for colour-blind readers (Crameri 2018)

_SETTINGS: dict[str, Any] = {
    "font.family": "DejaVu Sans",
    "font.size": 8.5,
    "axes.edgecolor": QUIET,
    "axes.labelcolor": INK,
    "axes.titlecolor": INK,
    "axes.titlesize": 9.5,
    "axes.titlelocation": "left",
    "axes.spines.top": False,
    "axes.spines.right": False,
    "xtick.color": INK,
    "ytick.color": INK,
    "text.color": INK,
    "legend.frameon": False,
    "svg.hashsalt": "seabed-texture",  # the same figure gives the same bytes
    "figure.dpi": 110,
}


@contextmanager
def styled() -> Iterator[None]:
    """Draw inside this, whatever the user's own settings are."""
    import matplotlib as mpl

    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(cast(Any, _SETTINGS))  # its keys are typed as a list of literals
        yield


def new_figure(width: float, height: float) -> Figure:
    """Make a figure that no global state knows of, in inches."""
    from matplotlib.figure import Figure

    return Figure(figsize=(width, height), layout="constrained")
