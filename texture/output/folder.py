"""The output folder: filled aside, put in place whole, left as it was when anything fails."""

from __future__ import annotations

import errno
import json
import os
import shutil
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from texture.errors import OutputError, RecipeError, TextureError
from texture.output.provenance import file_record

__all__ = ["RESULTS", "ResultFolder"]

RESULTS = (
    "stations.csv", "stations.gpkg", "audit.csv", "rows.csv", "deeper.csv", "texture.nc", "bed.nc", "bed.csv", "inventory.csv", "geotiff", "validation.csv",
    "held_out.csv", "report.html", "map.png", "figures", "provenance.json", "recipe_resolved.toml", "members.nc",
    "members_summary.nc", "members",
)  # fmt: skip
"""What a run writes into its folder; other files there are the user's and are never touched."""


class ResultFolder:
    """A folder of results.

    Parameters
    ----------
    path : path
        Made when the results are put in place, with its parents.
    overwrite : bool
        Replace the results of an earlier run, file by file. A build also removes what an earlier build wrote
        and it does not, as far as provenance.json lists it and it is unchanged. All other files stay.

    results : tuple of str
        What this run would write there.

    Raises
    ------
    RecipeError
        If the path is a file, or holds results and `overwrite` is off.
    OutputError
        If it cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> with tempfile.TemporaryDirectory() as place:
    ...     folder = ResultFolder(Path(place) / "out")
    ...     with folder.filling() as aside:
    ...         _ = (aside / "audit.csv").write_text("file,sheet,row\\n")
    ...     [path.name for path in folder.files]
    ['audit.csv']
    """

    def __init__(self, path: str | Path, overwrite: bool = False, results: tuple[str, ...] = RESULTS) -> None:
        self.path = Path(path)
        self.overwrite = overwrite
        self.files: tuple[Path, ...] = ()
        if self.path.exists() and not self.path.is_dir():
            raise RecipeError(f"{self.path}: is a file, expected a folder for the results; choose another output")
        found = [name for name in results if (self.path / name).exists()]
        if found and not overwrite:
            more = f" and {len(found) - 3} more" if len(found) > 3 else ""
            raise RecipeError(
                f"{self.path}: holds results of an earlier run ({', '.join(found[:3])}{more}); "
                "use --overwrite to replace them, or choose another output"
            )
        ground = _ground(self.path)
        if not os.access(ground, os.W_OK | os.X_OK):
            raise OutputError(f"{self.path}: cannot be written, {ground} is read-only; choose another output")

    @contextmanager
    def filling(self) -> Iterator[Path]:
        """Give a folder to write into; its files are put in place when the block ends without an error.

        After it, `files` lists what was written. When the block fails, or is interrupted, nothing of it is
        kept and the output folder is as it was.

        Raises
        ------
        OutputError
            In one line, for a full disk or any other failure to write.
        """
        with _one_line(self.path):
            aside = Path(tempfile.mkdtemp(prefix=".texture-", dir=_ground(self.path)))
        try:
            fresh, old = aside / "new", aside / "old"
            fresh.mkdir()
            old.mkdir()
            with _one_line(self.path):
                yield fresh
                self.files = self._put_in_place(fresh, old)
        finally:
            shutil.rmtree(aside, ignore_errors=True)

    @contextmanager
    def scratch(self) -> Iterator[Path]:
        """Give a folder on the same disk for what is made on the way; it is thrown away with all that is in it."""
        with _one_line(self.path):
            place = Path(tempfile.mkdtemp(prefix=".texture-", dir=_ground(self.path)))
        try:
            with _one_line(self.path):
                yield place
        finally:
            shutil.rmtree(place, ignore_errors=True)

    def _put_in_place(self, fresh: Path, old: Path) -> tuple[Path, ...]:
        names = sorted(p.relative_to(fresh) for p in fresh.rglob("*") if p.is_file())
        stale = _stale(self.path, names)
        made = _make_folders({self.path, *(self.path / name.parent for name in names)})
        placed: list[Path] = []
        saved: list[Path] = []
        try:
            for name in [*names, *stale]:
                if (self.path / name).exists():
                    if not self.overwrite:
                        raise OutputError(
                            f"{self.path / name}: appeared while the run was going on; kept, nothing written"
                        )
                    (old / name).parent.mkdir(parents=True, exist_ok=True)
                    os.replace(self.path / name, old / name)
                    saved.append(name)
            for name in names:
                os.replace(fresh / name, self.path / name)
                placed.append(name)
        except BaseException:
            for name in placed:
                (self.path / name).unlink()
            for name in saved:
                os.replace(old / name, self.path / name)
            for folder in made:
                folder.rmdir()
            raise
        return tuple(self.path / name for name in names)


def _stale(path: Path, names: list[Path]) -> list[Path]:
    """Files that an earlier build wrote and this one does not, unless somebody has changed them since.

    Without this, a map of an earlier run would stand beside the new ones.
    """
    record = path / "provenance.json"
    if Path(record.name) not in names or not record.is_file():
        return []
    try:
        results = json.loads(record.read_text(encoding="utf-8"))["results"]
        known = {Path(entry["file"]): entry["sha256"] for entry in results}
    except (ValueError, KeyError, TypeError):
        return []  # not ours: nothing is known, so nothing is removed
    found = [name for name in known if name not in names and not name.is_absolute() and ".." not in name.parts]
    return [n for n in found if (path / n).is_file() and file_record(path / n, path)["sha256"] == known[n]]


def _ground(path: Path) -> Path:
    """The folder itself, or its nearest parent that exists: same disk, so that files can be moved."""
    path = path.absolute()
    while not path.is_dir():
        path = path.parent
    return path


def _make_folders(folders: set[Path]) -> list[Path]:
    """Make folders and their parents; return those that were new, innermost first."""
    missing = {p for folder in folders for p in (folder, *folder.parents) if not p.exists()}
    for folder in sorted(missing, key=lambda p: len(p.parts)):
        folder.mkdir(exist_ok=True)
    return sorted(missing, key=lambda p: -len(p.parts))


@contextmanager
def _one_line(path: Path) -> Iterator[None]:
    try:
        yield
    except TextureError:
        raise
    except OSError as error:
        if error.errno in (errno.ENOSPC, errno.EDQUOT):
            reason = "the disk is full; free some space or choose another output"
        elif error.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
            reason = "the folder is read-only; choose another output"
        else:
            reason = f"{error.strerror or error}"
        raise OutputError(f"{path}: cannot be written: {reason}; nothing there was changed") from error
