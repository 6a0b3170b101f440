"""What all tests share: a small recipe, the demo, published samples, and how a skip is treated."""

from __future__ import annotations

import os
import shutil
import tomllib
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, NamedTuple

import pytest

if TYPE_CHECKING:
    import numpy as np

    from texture.result import Result

ROOT = Path(__file__).resolve().parents[1]
DEMO = ROOT / "demo_samples" / "kestrel_bight"
NOT_SHIPPED = (
    "not beside this repository"  # reference data that the project may read but not carry: the one skip allowed in CI
)


@pytest.fixture(scope="session")
def demo_recipe() -> Path:
    return DEMO / "recipe.toml"


@pytest.fixture(scope="session")
def plain(demo_recipe: Path, tmp_path_factory: pytest.TempPathFactory) -> Result:
    """The demo's bed under the program's own names, built once for all tests that look at it."""
    import tomli_w

    from texture import build

    folder = tmp_path_factory.mktemp("plain")
    for path in demo_recipe.parent.iterdir():
        if path.is_file():
            shutil.copy(path, folder / path.name)
    settings = tomllib.loads(demo_recipe.read_text())
    del settings["outputs"]["names"]
    (folder / "recipe.toml").write_text(tomli_w.dumps(settings))
    return build(folder / "recipe.toml", output=folder / "out")


@pytest.fixture
def small(tmp_path: Path) -> Path:
    """A recipe of thirty stations on a small raster."""
    return write_small(tmp_path)


@pytest.fixture(scope="session")
def small_in() -> Callable[[Path], Path]:
    """Write the small recipe into a folder, for what is built once for several tests."""
    return write_small


def write_small(folder: Path) -> Path:
    import numpy as np
    import tomli_w

    rng = np.random.default_rng(5)
    x, y = rng.uniform(500_500, 509_500, 30), rng.uniform(4_900_500, 4_905_500, 30)
    mud = 1 / (1 + np.exp(-(x - 505_000) / 2000 + rng.normal(0, 0.3, 30)))
    gravel = (1 - mud) * rng.uniform(0.02, 0.3, 30)
    rows = [f"S{i},{x[i]:.0f},{y[i]:.0f},{mud[i]:.4f},{1 - mud[i] - gravel[i]:.4f},{gravel[i]:.4f}" for i in range(30)]
    (folder / "grabs.csv").write_text("id,easting,northing,mud,sand,gravel\n" + "\n".join(rows) + "\n")
    recipe = {
        "title": "Small",
        "samples": [{"file": "grabs.csv", "crs": "EPSG:32626"}],
        "target": {"bounds": [500_000.0, 4_900_000.0, 510_000.0, 4_906_000.0], "cell_size": 500.0, "crs": "EPSG:32626"},
        "validation": {"count": 4},
        "rim": {"width_cells": 2, "sides": ["south"], "classes": {"sand": 1.0}},
    }
    path = folder / "recipe.toml"
    path.write_text(tomli_w.dumps(recipe))
    return path


@pytest.fixture
def need_tool():
    """Return the path of a command that only some tests need, or skip and name it."""

    def need(*names: str) -> str:
        for name in names:
            found = shutil.which(name)
            if found:
                return found
        pytest.skip(f"needs {' or '.join(names)}, which this machine does not have")

    return need


def pytest_sessionfinish(session: pytest.Session, exitstatus: int) -> None:
    """Where TEXTURE_NO_SKIPS is set, a test that was skipped for want of a tool is a failure."""
    if not os.environ.get("TEXTURE_NO_SKIPS") or exitstatus != 0:
        return
    reporter = session.config.pluginmanager.get_plugin("terminalreporter")
    skipped = reporter.stats.get("skipped", []) if reporter else []
    wanting = [r for r in skipped if NOT_SHIPPED not in str(r.longrepr)]
    if wanting:
        session.exitstatus = pytest.ExitCode.TESTS_FAILED
        for report in wanting:
            reporter.write_line(f"skipped where no skip is allowed: {report.nodeid}", red=True)


class Meuse(NamedTuple):
    points: np.ndarray
    log_zinc: np.ndarray
    root_distance: np.ndarray


@pytest.fixture(scope="session")
def meuse() -> Meuse:
    """155 flood-plain samples, in file order (the data set that the gstat and sp documentation works with)."""
    import numpy as np

    skgstat = pytest.importorskip("skgstat")
    file = Path(skgstat.__file__).parent / "data" / "samples" / "meuse.txt"
    if not file.exists():
        pytest.skip("this scikit-gstat carries no meuse.txt")
    with file.open() as handle:
        names = handle.readline().replace('"', "").replace("\t", ",").strip().split(",")
        rows = [line.replace('"', "").replace("\t", ",").strip().split(",") for line in handle]
    table = {name: [row[i] for row in rows] for i, name in enumerate(names)}
    column = {name: np.array(table[name], dtype=float) for name in ("x", "y", "zinc", "dist")}
    return Meuse(np.column_stack([column["x"], column["y"]]), np.log(column["zinc"]), np.sqrt(column["dist"]))
