"""The picture in the demo's README: the true bed, and where it was sampled."""

from collections.abc import Sequence
from pathlib import Path

import matplotlib
import numpy as np
from cmcrameri import cm
from matplotlib.figure import Figure
from PIL import Image

from demo_samples.kestrel_bight.make import grid, place
from demo_samples.kestrel_bight.make.answers import Answer

_MARKS = {"survey_1987.xlsx": "o", "survey_2004.csv": "^", "lab_2016.xlsx": "s", "notes_1962.ods": "x"}


def write_picture(path: Path, answers: Sequence[Answer]) -> None:
    """Draw true mud and gravel with depth lines, rock, and the samples of each survey."""
    fractions, rock = grid.cell_truth()
    rows, columns = np.arange(grid.ROWS + 1.0), np.arange(grid.COLUMNS + 1.0)
    longitude, latitude = place.to_degrees(*grid.grid_points(*np.meshgrid(rows, columns, indexing="ij")))
    middle = np.meshgrid(rows[:-1] + 0.5, columns[:-1] + 0.5, indexing="ij")
    centre = place.to_degrees(*grid.grid_points(*middle))
    depth = np.where(grid.sea_mask(), place.frame_depth_m(*grid.grid_points(*middle)), np.nan)
    with matplotlib.rc_context({"font.size": 8}):
        figure = Figure(figsize=(10.5, 3.9), layout="constrained")
        left, right = figure.subplots(1, 2, sharey=True)
        for axes, part, name in ((left, 0, "mud"), (right, 2, "gravel")):
            axes.set_facecolor("#d9d4c7")
            mesh = axes.pcolormesh(longitude, latitude, fractions[..., part], cmap=cm.batlow, vmin=0.0, vmax=1.0)
            lines = axes.contour(*centre, depth, levels=[10, 20, 40, 60, 80], colors="white", linewidths=0.6)
            axes.clabel(lines, fmt="%d m", fontsize=6)
            axes.contour(*centre, np.nan_to_num(rock), levels=[0.5], colors="black", linewidths=1.0)
            axes.set_title(f"true {name} fraction")
            axes.set_aspect(1.0 / np.cos(np.deg2rad(44.2)))
            axes.set_xlabel("longitude, degrees")
        left.set_ylabel("latitude, degrees")
        for file, mark in _MARKS.items():
            x, y = zip(*[(a.longitude, a.latitude) for a in answers if a.file == file], strict=True)
            right.plot(
                x, y, mark, markersize=2.6, markerfacecolor="none", markeredgewidth=0.6, color="white", alpha=0.9
            )
            right.plot([], [], mark, markersize=3, markerfacecolor="none", color="black", label=file)
        right.legend(loc="lower right", fontsize=6)
        figure.colorbar(mesh, ax=[left, right], label="fraction of dry mass")
        figure.savefig(path, dpi=110, metadata={"Software": None})
    with Image.open(path) as image:  # 128 colours are enough and a third of the size
        small = image.convert("RGB").quantize(128, dither=Image.Dither.NONE)
    small.save(path, optimize=True)
