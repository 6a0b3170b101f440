"""Seabed Texture: from messy grab-sample spreadsheets to a numerical model's starting bed.

The names below are the public door; everything is loaded when it is first asked for, so that
`import texture` costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from texture.composition import LogRatio, SizeCurve, classify
    from texture.pipeline import build, read_stations
    from texture.predict import Kriging
    from texture.structure import Covariance, Structure

__version__ = "0.1.0"

__all__ = [
    "Covariance",
    "Kriging",
    "LogRatio",
    "SizeCurve",
    "Structure",
    "__version__",
    "build",
    "classify",
    "read_stations",
]

_HOMES = {
    "Covariance": "texture.structure",
    "Kriging": "texture.predict",
    "LogRatio": "texture.composition",
    "SizeCurve": "texture.composition",
    "Structure": "texture.structure",
    "build": "texture.pipeline",
    "classify": "texture.composition",
    "read_stations": "texture.pipeline",
}


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
