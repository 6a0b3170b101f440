"""Charts of the fit and of the error: variograms and held-out scatter."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.report.style import INK, QUIET, STRONG, new_figure, styled

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from texture.validation.ensemble import DrawScores
    from texture.validation.held_out import HeldOut

__all__ = ["draw_calibration", "draw_pit", "draw_scatter", "draw_variograms"]

Floats = NDArray[np.float64]


def draw_scatter(parts: tuple[str, ...], observed: Floats, held_out: HeldOut) -> Figure:
    """Draw what was measured against what was predicted when the station was held out."""
    with styled():
        figure = new_figure(3.1 * len(parts), 3.1)
        for axis, part, i in zip(figure.subplots(1, len(parts), sharey=True), parts, range(len(parts)), strict=True):
            axis.plot([0, 1], [0, 1], color=QUIET, lw=0.8)
            axis.plot(held_out.predicted[:, i], observed[:, i], "o", ms=3, mfc=INK, mec="none", alpha=0.45)
            r2, rmse = held_out.score(part, "r_squared"), held_out.score(part, "rmse")
            axis.set_title(f"{part}: RMSE {rmse:.3f}, R² {r2:.2f}")
            axis.set(xlim=(-0.02, 1.02), ylim=(-0.02, 1.02), aspect="equal", xlabel="held-out prediction")
        figure.axes[0].set_ylabel("measured fraction")
    return figure


def draw_calibration(parts: tuple[str, ...], before: DrawScores, after: DrawScores) -> Figure:
    """Draw the share of held-out samples below each predicted quantile, before and after calibration.

    Honest intervals lie on the diagonal; a curve that is steeper in the middle has them too wide.
    """
    from texture.validation.ensemble import pit_share_below
    from texture.validation.scores import QUANTILE_LEVELS

    with styled():
        figure = new_figure(3.1 * len(parts), 3.3)
        for i, (axis, part) in enumerate(zip(figure.subplots(1, len(parts), sharey=True), parts, strict=True)):
            axis.plot([0, 1], [0, 1], color=QUIET, lw=0.8)
            for draws, line, label in ((before, QUIET, "as fitted"), (after, INK, "calibrated")):
                low, high = draws.pit_low[:, i], draws.pit_high[:, i]
                shares = [float(np.nanmean(pit_share_below(low, high, level))) for level in QUANTILE_LEVELS]
                axis.plot(QUANTILE_LEVELS, shares, "o-", ms=3.5, lw=1.2, color=line, label=label)
            axis.set_title(part)
            axis.set(xlim=(0, 1), ylim=(0, 1), aspect="equal", xlabel="predicted quantile")
        figure.axes[0].set_ylabel("share of samples below it")
        figure.axes[0].legend(loc="upper left", fontsize=7.5)
    return figure


def draw_pit(parts: tuple[str, ...], draws: DrawScores) -> Figure:
    """Draw the share of held-out samples in each tenth of their predicted distribution, part by part.

    Honest distributions give a tenth in each (line); a hump says too wide, a bowl too narrow, a slope biased.
    """
    from texture.validation.scores import PIT_BINS, pit_histogram

    left = np.arange(PIT_BINS) / PIT_BINS
    with styled():
        figure = new_figure(3.1 * len(parts), 2.3)
        for i, (axis, part) in enumerate(zip(figure.subplots(1, len(parts), sharey=True), parts, strict=True)):
            shares = pit_histogram(draws.pit_low[:, i], draws.pit_high[:, i])[0]
            axis.bar(left, shares, width=1.0 / PIT_BINS, align="edge", color=INK, edgecolor="white", alpha=0.6)
            axis.axhline(1.0 / PIT_BINS, color=STRONG, lw=0.9)
            axis.set(title=part, xlim=(0, 1), xlabel="place in the predicted distribution")
        figure.axes[0].set_ylabel("share of samples")
    return figure


def draw_variograms(structure: Any, names: tuple[str, ...]) -> Figure:
    """Draw the empirical variogram of each coordinate with both fits, a line down at the range of each."""
    with styled():
        figure = new_figure(4.4 * len(names), 3.1)
        for axis, covariance, name in zip(np.atleast_1d(figure.subplots(1, len(names))), structure, names, strict=True):
            record = covariance.fit_record
            seen = record.variogram
            far = np.linspace(0.0, float(seen.distance_m.max()), 200)[1:]
            fits = (record.covariance, record.variogram_covariance)
            for (label, gamma), fit, line in zip(record.curves(far).items(), fits, (INK, QUIET), strict=True):
                reach = f", range {fit.range_m / 1000:.1f} km" if fit.structures else ""
                axis.plot(far / 1000, gamma, color=line, label=f"fit by {label}{reach}")
                if fit.structures and fit.range_m <= far[-1]:
                    top = float(fit.variogram(np.array([fit.range_m]))[0])
                    axis.plot([fit.range_m / 1000] * 2, [0.0, top], color=line, lw=0.9, ls=":")
            axis.plot(seen.distance_m / 1000, seen.semivariance, "o", color=STRONG, ms=4, label="pairs of stations")
            axis.set(xlabel="distance, km", ylabel="semivariance", xlim=(0, None), ylim=(0, None), title=name)
            axis.legend(loc="best", fontsize=7.5)
    return figure
