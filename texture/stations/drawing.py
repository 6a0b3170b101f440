"""Draw stations on matplotlib axes: a notebook's first look."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from texture.stations.account import Stations

__all__ = ["plot_stations"]

INK = "#22303a"


def plot_stations(stations: Stations, part: str = "mud", ax: Axes | None = None) -> Axes:
    """Draw where the stations lie, coloured by one part; rings where it is not known, crosses on hard ground.

    Parameters
    ----------
    stations : Stations
    part : str
        "mud", "sand", "gravel", or another column of numbers in the stations' table.
    ax : matplotlib Axes, optional
        Made where none is given.

    Returns
    -------
    matplotlib Axes

    Raises
    ------
    KeyError
        If the table has no such column.
    """
    import matplotlib.pyplot as plt
    from cmcrameri import cm

    if part not in stations.table.columns:
        raise KeyError(
            f'stations have no column "{part}"; expected mud, sand, gravel or one of {list(stations.table.columns)}'
        )
    if ax is None:
        _, ax = plt.subplots(layout="constrained")
    table = stations.samples
    values = table[part].to_numpy(dtype=np.float64)
    known = np.isfinite(values)
    rest = table[~known]
    ax.plot(rest["longitude"], rest["latitude"], "o", ms=4, mfc="none", mec=INK, mew=0.6, label=f"{part} not known")
    drawn = ax.scatter(
        table["longitude"][known],
        table["latitude"][known],
        c=values[known],
        s=18,
        cmap=cm.batlow,
        edgecolors=INK,
        linewidths=0.3,
    )
    ax.figure.colorbar(
        drawn, ax=ax, label=f"{part}, fraction of dry mass" if part in ("mud", "sand", "gravel") else part
    )
    hard = stations.hard_ground
    if len(hard):
        ax.plot(hard["longitude"], hard["latitude"], "x", ms=6, color=INK, label="hard ground")
    if len(rest) or len(hard):
        ax.legend()
    middle = float(stations.table["latitude"].mean()) if len(stations.table) else 0.0
    ax.set_aspect(1.0 / np.cos(np.radians(middle)))
    ax.set(xlabel="longitude, degrees", ylabel="latitude, degrees")
    return ax
