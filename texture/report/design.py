"""A picture of a sensitivity set's design: which case has which settings."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np

from texture.report.encode import Picture, picture
from texture.report.style import INK, QUIET, STRONG, new_figure, styled

if TYPE_CHECKING:
    from texture.recipe import Sensitivity, Vary

__all__ = ["design_picture"]


class CaseSettings(Protocol):
    """One case; see `texture.cases.Case`."""

    @property
    def number(self) -> int:
        """From 1."""

    @property
    def settings(self) -> Mapping[Vary, Any]:
        """What differs from the recipe."""


def design_picture(cases: Sequence[CaseSettings], block: Sensitivity) -> Picture:
    """Draw one row for each thing that varies: a dot for each case, grey where it is as in the recipe."""
    numbers = np.array([c.number for c in cases])
    with styled():
        figure = new_figure(max(4.0, min(12.0, 1.5 + 0.16 * len(numbers))), 0.5 + 1.1 * len(block.vary))
        rows = figure.subplots(len(block.vary), 1, sharex=True, squeeze=False)[:, 0]
        for axis, vary in zip(rows, block.vary, strict=True):
            words = sorted({str(v) for v in vary.values or ()}) if vary.what == "control" else []
            plain = 1.0 if vary.factors is not None else np.nan
            for case in cases:
                value = case.settings.get(vary)
                same = value is None
                height = plain if value is None else words.index(str(value)) if words else float(value)
                if np.isfinite(height):
                    axis.plot(case.number, height, "o", ms=4, color=QUIET if same else STRONG, mec="none")
                else:
                    axis.plot(
                        case.number, 0.04, "o", ms=3, color=QUIET, mec="none", transform=axis.get_xaxis_transform()
                    )
            if vary.factors is not None:
                axis.set_yscale("log")
                axis.axhline(1.0, color=QUIET, lw=0.6)
                ends = sorted({min(vary.factors), 1.0, max(vary.factors)})
                axis.set_yticks(ends, [f"× {e:g}" for e in ends])
                axis.minorticks_off()
            if words:
                axis.set_yticks(range(len(words)), words)
                axis.set_ylim(-0.5, len(words) - 0.5)
            axis.set_title(vary.label.replace("_", " "), color=INK)
        rows[-1].set_xlabel("case")
        rows[-1].set_xlim(0.3, numbers.max() + 0.7)
    return picture(
        figure,
        "Settings of each case; grey where it is as in the recipe.",
        "Dots of settings by case, one row for each setting.",
    )
