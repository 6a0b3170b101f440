"""Draw a covariance as its variogram on matplotlib axes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from texture.structure.covariance import Covariance

__all__ = ["plot_covariance"]


def plot_covariance(covariance: Covariance, ax: Any = None) -> Any:
    """Draw the semivariance against distance; of a fitted one with its empirical points and both fits.

    Parameters
    ----------
    covariance : Covariance
    ax : matplotlib Axes, optional
        Made where none is given.

    Returns
    -------
    matplotlib Axes
    """
    import matplotlib.pyplot as plt

    if ax is None:
        _, ax = plt.subplots(layout="constrained")
    if covariance.fit_record is not None:
        covariance.fit_record.plot(ax)
        return ax
    distance = np.linspace(0.0, 1.5 * covariance.range_m or 1.0, 200)[1:]
    ax.plot(distance, covariance.variogram(distance))
    if covariance.structures:
        ax.axvline(covariance.range_m, color="0.6", lw=0.8, ls=":")
    ax.set(xlabel="distance (m)", ylabel="semivariance", xlim=(0, None), ylim=(0, None))
    return ax
