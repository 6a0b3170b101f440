"""A journal of finished folds beside the results, so that an interrupted validation goes on where it stopped."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import zipfile
from collections.abc import Iterable, Mapping
from importlib import resources
from pathlib import Path
from typing import Any

import numpy as np

__all__ = ["FoldJournal", "fingerprint"]

FOLDER = "unfinished_validation"


def fingerprint(texts: Iterable[str], arrays: Iterable[Any], files: Iterable[Path] = ()) -> str:
    """Digest of everything that a validation follows from: settings, arrays, files, and the program's own source."""
    digest = hashlib.sha256()
    for text in texts:
        digest.update(text.encode() + b"\0")
    for array in arrays:
        values = np.ascontiguousarray(array)
        digest.update(f"{values.dtype}{values.shape}".encode() + values.tobytes())
    for path in files:
        digest.update(hashlib.sha256(path.read_bytes()).digest())
    for package in (
        "texture",
        *(f"texture.{room}" for room in ("composition", "structure", "space", "predict", "validation")),
    ):
        for source in sorted(resources.files(package).iterdir(), key=lambda f: f.name):
            if source.name.endswith(".py"):
                digest.update(source.read_bytes())
    return digest.hexdigest()[:32]


class FoldJournal:
    """Finished folds on disk, one small file each, written whole or not at all.

    Nothing is written before the first fold is done. A journal of other settings is of no use any more and is removed when this one
    begins; `clear` removes this one when the results are in place.

    Parameters
    ----------
    output : path
        The output folder; made when needed.
    key : str
        See `fingerprint`.
    """

    def __init__(self, output: Path, key: str) -> None:
        self.folder = output / FOLDER
        self.own = self.folder / key
        self.resumed = 0

    def get(self, run: int, fold: int) -> Mapping[str, Any] | None:
        """What was kept of one fold; None if nothing, or nothing that can be read."""
        path = self.own / f"{run}_{fold}.npz"
        try:
            with np.load(path, allow_pickle=False) as stored:
                record = {name: stored[name] for name in stored.files}
        except (OSError, ValueError, EOFError, KeyError, zipfile.BadZipFile):
            return None
        structure = json.loads(str(record.pop("structure")))
        self.resumed += 1
        return {**record, "structure": structure}

    def put(self, run: int, fold: int, record: Mapping[str, Any]) -> None:
        """Keep one fold; a journal that cannot be written is done without, the validation itself goes on."""
        arrays = {name: value for name, value in record.items() if name != "structure"}
        aside = self.own / f"{run}_{fold}.part"
        try:
            if not self.own.is_dir():
                shutil.rmtree(self.folder, ignore_errors=True)
                self.own.mkdir(parents=True)
            with aside.open("wb") as stream:
                np.savez(stream, **arrays, structure=np.array(json.dumps(record["structure"])))
            os.replace(aside, self.own / f"{run}_{fold}.npz")
        except OSError:
            return

    def clear(self) -> None:
        """Remove the journal."""
        shutil.rmtree(self.folder, ignore_errors=True)
