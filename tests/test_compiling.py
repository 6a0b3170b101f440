"""Compiled functions are kept on disk, and compiled anew when any source that went into them has changed."""

import importlib
import pkgutil
import sys

import pytest
from numba.core.dispatcher import Dispatcher

import texture
from texture import compiling

NEAR = "from texture.compiling import compiled\nSTEP = {step}\n\n@compiled\ndef inner(x):\n    return x * {factor}\n"
FAR = (
    "from texture.compiling import compiled\nfrom {package}.near import STEP, inner\n\n"
    "@compiled(parallel=True)\ndef outer(x):\n    return inner(x) + STEP\n"
)


@pytest.fixture
def package(tmp_path, monkeypatch):
    """Import `far` of a package of two modules anew, `near` written with the numbers given."""
    name = "two_modules"
    folder = tmp_path / name
    folder.mkdir()
    (folder / "__init__.py").write_text("")
    (folder / "far.py").write_text(FAR.format(package=name))
    monkeypatch.syspath_prepend(tmp_path)
    monkeypatch.setattr(sys, "dont_write_bytecode", True)  # two versions within one second would be taken for one

    def load(**numbers):
        (folder / "near.py").write_text(NEAR.format(**numbers))
        for module in [m for m in sys.modules if m.partition(".")[0] == name]:
            monkeypatch.delitem(sys.modules, module)
        importlib.invalidate_caches()
        compiling.source_stamp.cache_clear()
        compiling._imported.cache_clear()
        return importlib.import_module(f"{name}.far").outer

    return load


@pytest.mark.filterwarnings("ignore::numba.core.errors.NumbaPerformanceWarning")  # nothing to spread over threads here
def test_a_changed_function_or_constant_of_another_file_is_compiled_anew(package):
    first = package(step=1.0, factor=2.0)
    assert first(3.0) == 7.0
    again = package(step=1.0, factor=2.0)
    assert again(3.0) == 7.0
    assert again.stats.cache_hits, "an unchanged function came from the disk"
    assert package(step=1.0, factor=5.0)(3.0) == 16.0
    assert package(step=2.0, factor=5.0)(3.0) == 17.0


def test_sources_follow_imports_from_file_to_file():
    found = compiling.sources("texture.composition.quantiles")
    assert {"texture.composition.quantiles", "texture.composition.product", "texture.compiling"} <= found
    assert "texture.composition.words" not in found
    assert not [name for name in found if not name.startswith("texture.")]


def test_every_compiled_function_is_stamped():
    """Nobody compiles in a way of their own: what is kept knows all that it was made of."""
    wrong = []
    for info in pkgutil.walk_packages(texture.__path__, "texture."):
        source = compiling._source(info.name)
        if "njit" in source and info.name != "texture.compiling":
            wrong.append(info.name)
        if "@compiled" in source:
            module = importlib.import_module(info.name)
            for value in vars(module).values():
                if isinstance(value, Dispatcher) and value.py_func.__module__ == info.name:
                    assert value._cache._cache_file._source_stamp == compiling.source_stamp(info.name)
    assert not wrong, f"compiled without `texture.compiling.compiled`: {wrong}"
