"""The house rules that a machine can check: imports go one way, array rooms touch no files."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
TEXTURE = ROOT / "texture"

# What each room may import of ours, besides itself. `recipe`, `errors` and `compiling` are the ground that all stand on.
GROUND = {"errors", "recipe", "compiling", "__version__"}
ALLOWED = {
    "recipe": {"errors"},
    "composition": GROUND,
    "structure": GROUND,
    "space": GROUND,
    "treatments": GROUND | {"composition", "observations"},
    "predict": GROUND | {"structure", "composition"},
    "validation": GROUND | {"structure", "composition", "predict"},
    "bed": GROUND | {"composition"},
    "stations": GROUND | {"composition"},
    "targets": GROUND | {"space"},
    "output": GROUND | {"targets", "stations", "bed", "composition"},
    "report": GROUND
    | {"targets", "stations", "bed", "composition", "validation", "structure", "space", "output", "result"},
}
ARRAY_ROOMS = ["composition", "structure", "space", "predict", "validation", "bed"]
FILE_LIBRARIES = {"pandas", "geopandas", "rasterio", "xarray", "netCDF4", "pyogrio", "python_calamine", "pathlib"}


def imports(path: Path) -> set[str]:
    found = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            found |= {node.module} if node.module != "texture" else {f"texture.{a.name}" for a in node.names}
    return found


def rooms_used(path: Path) -> set[str]:
    return {name.split(".")[1] for name in imports(path) if name.startswith("texture.")}


@pytest.mark.parametrize("room", sorted(ALLOWED))
def test_rooms_import_one_way(room):
    for path in (TEXTURE / room).rglob("*.py"):
        wrong = rooms_used(path) - ALLOWED[room] - {room}
        assert not wrong, f"{path.relative_to(ROOT)} imports {sorted(wrong)}"


def test_every_room_is_listed():
    assert {p.parent.name for p in TEXTURE.glob("*/__init__.py")} == set(ALLOWED)


def test_the_library_never_imports_the_command_line():
    for path in TEXTURE.rglob("*.py"):
        assert not {n for n in imports(path) if n.split(".")[0] in {"texture_cli", "typer", "rich"}}, path


@pytest.mark.parametrize("room", ARRAY_ROOMS)
def test_array_rooms_touch_no_files(room):
    for path in (TEXTURE / room).rglob("*.py"):
        wrong = {n.split(".")[0] for n in imports(path)} & FILE_LIBRARIES
        assert not wrong, f"{path.relative_to(ROOT)} imports {sorted(wrong)}"


def test_help_loads_nothing_heavy():
    code = (
        "import sys, texture_cli.main; "
        "print([m for m in ('numpy', 'scipy', 'pandas', 'xarray', 'numba', 'matplotlib', 'pydantic') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
