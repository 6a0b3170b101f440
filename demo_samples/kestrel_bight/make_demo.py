"""Make the files of Kestrel Bight, an invented shelf whose true bed is known.

Run from the repository's root::

    python -m demo_samples.kestrel_bight.make_demo            # rewrites the committed files
    python -m demo_samples.kestrel_bight.make_demo --into DIR # writes them somewhere else

The same bytes every time. `README.md`, `recipe.toml` and `names.toml` are written by hand and left alone.
"""

import argparse
from pathlib import Path

import numpy as np

from demo_samples.kestrel_bight.make import grid, lab_2016, maps, mesh, notes_1962, survey_1987, survey_2004
from demo_samples.kestrel_bight.make.answers import write_answers
from demo_samples.kestrel_bight.make.picture import write_picture


def make_demo(folder: Path) -> list[Path]:
    """Write every generated file into `folder` and return their paths."""
    folder.mkdir(parents=True, exist_ok=True)
    grid.write_grid(folder / "model_grid.nc")
    grid.write_truth(folder / "truth.nc")
    mesh.write_mesh(folder / "model_mesh.nc")
    mesh.write_places(folder / "places.csv")
    maps.write_depth(folder / "depth.tif")
    maps.write_coast(folder / "coast.geojson")
    answers = []
    for survey in (survey_1987, survey_2004, lab_2016, notes_1962):
        seed = int(survey.__name__[-4:])  # each survey has its own draws, so that one can change alone
        answers += survey.write_survey(folder / survey.FILE, np.random.default_rng(seed))
    write_answers(folder / "answers.csv", answers)
    write_picture(folder / "kestrel_bight.png", answers)
    files = [
        "model_grid.nc",
        "truth.nc",
        "model_mesh.nc",
        "places.csv",
        "depth.tif",
        "coast.geojson",
        "answers.csv",
        "kestrel_bight.png",
    ]
    files += [survey.FILE for survey in (survey_1987, survey_2004, lab_2016, notes_1962)]
    return [folder / name for name in files]


def main() -> None:
    parser = argparse.ArgumentParser(description="Make the files of Kestrel Bight.")
    parser.add_argument("--into", type=Path, default=Path(__file__).parent, help="folder to write to")
    for path in make_demo(parser.parse_args().into):
        print(f"{path} {path.stat().st_size / 1000.0:.0f} kB")


if __name__ == "__main__":
    main()
