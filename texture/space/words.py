"""A space in words and in numbers, for the terminal, the page and the record."""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np

from texture.space.in_water import InWater
from texture.space.space import Space

__all__ = ["own_ranges", "space_line", "space_record"]

TRANSFORM_WORDS = {"none": "", "log": "ln(1 + {})", "sqrt": "√{}"}


class Stretched(Protocol):
    """A fitted covariance, as far as ranges are told."""

    @property
    def range_m(self) -> float:
        """Longest range, metres."""

    @property
    def axis_scales(self) -> tuple[float, ...] | None:
        """Metres that one unit of each coordinate counts for."""


def own_ranges(space: Space, covariance: Stretched) -> dict[str, float]:
    """Range of each covariate that is a coordinate, in its standard deviations at the stations; empty without structure."""
    names = space.axis_names
    if not names or covariance.axis_scales is None:
        return {}
    return {n: covariance.range_m / s for n, s in zip(names, covariance.axis_scales[-len(names) :], strict=True)}


def _covariate_words(space: Space) -> dict[str, str]:
    used = space.axes or space.columns
    if used is None:
        return {}
    return {c.name: TRANSFORM_WORDS[c.transform].format(c.name) or c.name for c in used.layers}


def space_line(space: Space) -> str:
    """Say in one line what distance means here, and what the mean follows."""
    words = _covariate_words(space)
    if space.axes is not None:
        return f"in the plane, with {', '.join(words.values())} as further coordinates"
    if space.drift:
        return f"in the plane; the mean follows {', '.join(words.get(n, n) for n in space.drift)}"
    return "through water" if space.ground is not None else "in the plane"


def space_record(space: Space) -> dict[str, Any]:
    """Plain numbers and strings for JSON."""
    used = space.axes or space.columns
    record: dict[str, Any] = {"distance": space_line(space), "notes": list(space.notes)}
    if used is not None:
        record["covariates"] = [
            {"name": c.name, "transform": c.transform, "centre": float(np.float64(c.centre)), "scale": float(c.scale)}
            for c in used.layers
        ]
    if isinstance(space.ground, InWater):
        record["in_water"] = space.ground.to_dict()
    return record
