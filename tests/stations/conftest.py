"""The one fixture of these tests: write a small file and read it as stations."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from tests.stations.samples import as_csv, recipe_for, write_xlsx
from texture.stations import Stations, read_samples

Read = Callable[..., Stations]


@pytest.fixture
def read(tmp_path: Path) -> Read:
    """Write rows (or text, or bytes) to a file of the given name and read it as stations."""

    def reader(
        content: list[list[Any]] | str | bytes,
        name: str = "survey.csv",
        block: dict[str, Any] | None = None,
        **settings: Any,
    ) -> Stations:
        path = tmp_path / name
        if name.endswith(".xlsx") and isinstance(content, list):
            write_xlsx(path, {"Stations": content})
        elif isinstance(content, bytes):
            path.write_bytes(content)
        else:
            path.write_text(content if isinstance(content, str) else as_csv(content), encoding="utf-8")
        return read_samples(recipe_for({"file": path, **(block or {})}, **settings))

    return reader
