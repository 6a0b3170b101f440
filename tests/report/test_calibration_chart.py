"""The calibration charts: what is drawn is the share of samples below each predicted quantile, and in each tenth."""

import numpy as np

from texture.report.charts import draw_calibration, draw_pit
from texture.validation.ensemble import DrawScores
from texture.validation.scores import QUANTILE_LEVELS


def scores(pit):
    pit = np.column_stack([pit, pit, pit])
    empty = {name: np.full(len(pit), np.nan) for name in DrawScores.__dataclass_fields__}
    return DrawScores(**{**empty, "pit_low": pit, "pit_high": pit})


def test_honest_quantiles_lie_on_the_diagonal_and_wide_ones_do_not():
    even = (np.arange(1000) + 0.5) / 1000.0
    wide = 0.5 + (even - 0.5) / 2.0  # samples crowd around the median: the intervals were too wide
    figure = draw_calibration(("mud", "sand", "gravel"), scores(wide), scores(even))
    axis = figure.axes[1]
    before, after = (line.get_ydata() for line in axis.lines[1:])
    np.testing.assert_allclose(after, QUANTILE_LEVELS, atol=1e-3)
    np.testing.assert_allclose(before, np.clip(0.5 + 2.0 * (np.array(QUANTILE_LEVELS) - 0.5), 0, 1), atol=2e-3)
    assert axis.get_title(loc="left") == "sand"
    assert axis.get_xlabel() == "predicted quantile"


def test_bars_of_the_histogram_are_shares():
    even = (np.arange(1000) + 0.5) / 1000.0
    wide = 0.5 + (even - 0.5) / 2.0
    honest, hump = (
        [bar.get_height() for bar in draw_pit(("mud", "sand", "gravel"), scores(p)).axes[2].patches]
        for p in (even, wide)
    )
    np.testing.assert_allclose(honest, 0.1, atol=2e-3)
    np.testing.assert_allclose(hump, [0, 0, 0.1, 0.2, 0.2, 0.2, 0.2, 0.1, 0, 0], atol=2e-3)
