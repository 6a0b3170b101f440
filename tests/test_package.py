"""The wheel: it holds both source roots, and its command runs from it."""

import os
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]


@pytest.mark.slow
def test_the_built_wheel_runs(tmp_path):
    quiet = ["--quiet", "--disable-pip-version-check", "--no-deps"]
    pip = [sys.executable, "-m", "pip"]
    subprocess.run([*pip, "wheel", *quiet, "--no-build-isolation", "-w", tmp_path, ROOT], check=True)
    (wheel,) = tmp_path.glob("seabed_texture-*.whl")
    names = set(zipfile.ZipFile(wheel).namelist())
    assert {"texture/py.typed", "texture_cli/main.py", "texture/report/template.html"} <= names
    assert not {n for n in names if n.startswith(("tests/", "demo_samples/", "benchmarks/"))}
    installed = tmp_path / "installed"
    subprocess.run([*pip, "install", *quiet, "--target", installed, wheel], check=True)
    environment = {**os.environ, "PYTHONPATH": str(installed)}
    done = subprocess.run(
        [sys.executable, installed / "bin" / "texture", "--version"],
        capture_output=True, text=True, check=True, env=environment, cwd=tmp_path,
    )  # fmt: skip
    assert done.stdout.startswith("texture 0.")
    where = subprocess.run(
        [sys.executable, "-c", "import texture, texture_cli; print(texture.__file__, texture_cli.__file__)"],
        capture_output=True, text=True, check=True, env=environment, cwd=tmp_path,
    )  # fmt: skip
    assert all(path.startswith(str(installed)) for path in where.stdout.split())
