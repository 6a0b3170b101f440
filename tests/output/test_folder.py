import os
import resource
import subprocess
import sys

import pytest

from texture.errors import OutputError, RecipeError
from texture.output import ResultFolder, provenance, write_json


def content(path):
    return {p.relative_to(path).as_posix(): p.read_text() for p in sorted(path.rglob("*")) if p.is_file()}


def fill(folder, **files):
    with folder.filling() as aside:
        for name, text in files.items():
            file = aside / name.replace("__", "/").replace("_", ".")
            file.parent.mkdir(parents=True, exist_ok=True)
            file.write_text(text)


def half_fill(folder, failure):
    with folder.filling() as aside:
        (aside / "bed.nc").write_text("half")
        raise failure


def test_a_new_folder_with_its_parents(tmp_path):
    folder = ResultFolder(tmp_path / "a" / "b")
    fill(folder, bed_nc="new", geotiff__mud_tif="image")
    assert content(tmp_path / "a" / "b") == {"bed.nc": "new", "geotiff/mud.tif": "image"}
    assert [p.name for p in folder.files] == ["bed.nc", "mud.tif"]
    assert os.listdir(tmp_path / "a") == ["b"]  # nothing of the work is left


def test_results_are_not_replaced_unless_asked(tmp_path):
    (tmp_path / "bed.nc").write_text("old")
    (tmp_path / "my notes.txt").write_text("mine")
    with pytest.raises(RecipeError, match=r"holds results of an earlier run \(bed.nc\); use --overwrite"):
        ResultFolder(tmp_path)
    fill(ResultFolder(tmp_path, overwrite=True), bed_nc="new")
    assert content(tmp_path) == {"bed.nc": "new", "my notes.txt": "mine"}


def test_files_of_others_do_not_forbid_a_first_run(tmp_path):
    (tmp_path / "my notes.txt").write_text("mine")
    fill(ResultFolder(tmp_path), bed_nc="new")
    assert content(tmp_path) == {"bed.nc": "new", "my notes.txt": "mine"}


def build(folder, **files):
    with folder.filling() as aside:
        for name, text in files.items():
            file = aside / name.replace("__", "/").replace("_", ".")
            file.parent.mkdir(parents=True, exist_ok=True)
            file.write_text(text)
        made = sorted(p for p in aside.rglob("*") if p.is_file())
        write_json(aside / "provenance.json", provenance([], aside, counts={}, seconds={}, files=made))


def test_a_new_build_leaves_no_map_of_the_old_one(tmp_path):
    build(ResultFolder(tmp_path), bed_nc="old", geotiff__mud_tif="old", geotiff__low_tif="old", geotiff__high_tif="old")
    (tmp_path / "geotiff" / "high.tif").write_text("changed by hand")
    (tmp_path / "geotiff" / "mine.tif").write_text("mine")
    build(ResultFolder(tmp_path, overwrite=True), bed_nc="new", geotiff__mud_tif="new")
    found = content(tmp_path)
    del found["provenance.json"]
    assert found == {
        "bed.nc": "new", "geotiff/mud.tif": "new", "geotiff/high.tif": "changed by hand", "geotiff/mine.tif": "mine",
    }  # fmt: skip


def test_an_intake_leaves_the_bed_of_a_build(tmp_path):
    build(ResultFolder(tmp_path), bed_nc="old", audit_csv="old")
    fill(ResultFolder(tmp_path, overwrite=True), audit_csv="new")
    assert content(tmp_path)["bed.nc"] == "old"


def test_a_strange_provenance_removes_nothing(tmp_path):
    (tmp_path / "provenance.json").write_text('{"results": [{"file": "../secret", "sha256": "0"}]}')
    (tmp_path / "bed.nc").write_text("old")
    build(ResultFolder(tmp_path, overwrite=True), audit_csv="new")
    assert content(tmp_path)["bed.nc"] == "old"
    (tmp_path / "provenance.json").write_text("[]")
    build(ResultFolder(tmp_path, overwrite=True), audit_csv="newer")
    assert content(tmp_path)["audit.csv"] == "newer"


@pytest.mark.parametrize("failure", [ValueError("a fault"), KeyboardInterrupt()])
def test_a_failed_run_changes_nothing(tmp_path, failure):
    (tmp_path / "bed.nc").write_text("old")
    with pytest.raises(type(failure)):
        half_fill(ResultFolder(tmp_path, overwrite=True), failure)
    assert content(tmp_path) == {"bed.nc": "old"}


def test_a_failed_first_run_leaves_no_folder(tmp_path):
    with pytest.raises(ValueError, match="fault"):
        half_fill(ResultFolder(tmp_path / "out"), ValueError("a fault"))
    assert os.listdir(tmp_path) == []


def test_failure_while_moving_puts_the_old_files_back(tmp_path, monkeypatch):
    (tmp_path / "audit.csv").write_text("old audit")
    (tmp_path / "bed.nc").write_text("old bed")
    real, calls = os.replace, []

    def fails_at_the_fourth(source, to):
        calls.append(to)
        if len(calls) == 4:  # audit aside, bed aside, audit in, bed in
            raise OSError(28, "No space left on device")
        real(source, to)

    monkeypatch.setattr(os, "replace", fails_at_the_fourth)
    with pytest.raises(OutputError, match="the disk is full; free some space or choose another output"):
        fill(ResultFolder(tmp_path, overwrite=True), audit_csv="new", bed_nc="new", geotiff__mud_tif="new")
    assert content(tmp_path) == {"audit.csv": "old audit", "bed.nc": "old bed"}
    assert sorted(os.listdir(tmp_path)) == ["audit.csv", "bed.nc"]


def test_a_file_in_the_way(tmp_path):
    (tmp_path / "out").write_text("a file")
    with pytest.raises(RecipeError, match="is a file, expected a folder"):
        ResultFolder(tmp_path / "out")


def test_a_read_only_place_is_found_before_the_work(tmp_path, monkeypatch):
    monkeypatch.setattr(os, "access", lambda path, mode: False)  # the superuser may write anywhere
    with pytest.raises(OutputError, match="is read-only; choose another output"):
        ResultFolder(tmp_path / "out")


@pytest.mark.slow
@pytest.mark.parametrize("kind", ["bed.nc", "mud.tif"])
def test_a_full_disk_is_one_line_and_changes_nothing(tmp_path, kind):
    """A limit on the size of files stands for a full disk: the libraries meet the same failed write."""
    (tmp_path / "bed.nc").write_text("old")
    code = f"""
import sys; sys.path.insert(0, {str(os.path.dirname(__file__))!r})
import numpy as np
from conftest import make_raster, make_recipe, make_estimate
from texture.bed import make_bed
from texture.errors import OutputError
from texture.output import ResultFolder, bed_dataset, write_netcdf, pixel_grid, write_geotiff
target, recipe = make_raster(), make_recipe()
estimate = make_estimate(target)
data = bed_dataset(make_bed(estimate.fractions, estimate.evidence, target, recipe.bed), target, recipe)
import resource
resource.setrlimit(resource.RLIMIT_FSIZE, (2000, resource.RLIM_INFINITY))
try:
    with ResultFolder({str(tmp_path)!r}, overwrite=True).filling() as aside:
        if {kind!r} == "bed.nc":
            write_netcdf(data, aside / "bed.nc")
        else:
            grid = pixel_grid(target)
            noise = np.random.default_rng(1).normal(size=target.n_cells)
            write_geotiff(aside / "mud.tif", grid, noise, "noise")
            assert (aside / "mud.tif").stat().st_size < 2000, "too small to fail"
            (aside / "mud.tif").write_bytes(b"0" * 3000)
except OutputError as error:
    print(error)
"""
    assert resource.getrlimit(resource.RLIMIT_FSIZE)[0] == resource.RLIM_INFINITY
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert "cannot be written" in done.stdout
    assert done.stdout.count("\n") == 1
    assert content(tmp_path) == {"bed.nc": "old"}
