"""`provenance.json`: what went in, with which versions, and how long it took."""

from __future__ import annotations

import hashlib
import json
import platform
from collections.abc import Iterable, Mapping
from importlib import metadata
from pathlib import Path
from typing import Any

import texture

__all__ = ["file_record", "provenance", "write_json"]

PACKAGES = (
    "numpy", "scipy", "pandas", "python-calamine", "geopandas", "shapely", "pyproj", "pyogrio", "rasterio", "xarray",
    "netCDF4", "cf-xarray", "numba", "pykrige", "scikit-learn", "pydantic",
)  # fmt: skip


def file_record(path: Path, base: Path) -> dict[str, Any]:
    """Name, size and SHA-256 of an input; the name is relative to the recipe's folder, never absolute.

    A file outside that folder is named by its last part alone.
    """
    digest = hashlib.sha256()
    with path.open("rb") as stream:
        while chunk := stream.read(1 << 20):
            digest.update(chunk)
    name = path.relative_to(base).as_posix() if path.is_relative_to(base) else path.name
    return {"file": name, "bytes": path.stat().st_size, "sha256": digest.hexdigest()}


def provenance(
    inputs: Iterable[Path],
    base: Path,
    *,
    counts: Mapping[str, int],
    seconds: Mapping[str, float],
    files: Iterable[Path] = (),
    **more: Any,
) -> dict[str, Any]:
    """Collect what a later reader needs to make the same bed again.

    Parameters
    ----------
    inputs : paths
        The recipe and every file that it names.
    base : path
        The recipe's folder.
    counts : mapping
        Rows and stations.
    seconds : mapping
        Time of each stage.
    files : paths
        Results, named from the folder of the outermost one, with their hashes.
    **more
        Further entries, such as `seed=1`.
    """
    results = list(files)
    folder = min((path.parent for path in results), key=lambda p: len(p.parts), default=base)
    return {
        "program": {"name": "Seabed Texture", "version": texture.__version__},
        "python": platform.python_version(),
        "packages": {name: metadata.version(name) for name in PACKAGES},
        "inputs": [file_record(path, base) for path in inputs],
        "counts": dict(counts),
        "seconds": {name: round(value, 3) for name, value in seconds.items()},
        **more,
        "results": [file_record(path, folder) for path in results],
    }


def write_json(path: Path, content: Any) -> None:
    """Write JSON with two spaces of indent; NaN is refused, since JSON has none."""
    path.write_text(json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False) + "\n", encoding="utf-8")
