"""The layers of the explorable map: every one a byte a pixel, with its own colours and words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.report.maps import EVIDENCE_COLOURS
from texture.report.style import PART_MAP

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["NOTHING", "STEPS", "MapLayer", "map_layers"]

Floats = NDArray[np.float64]
STEPS = 250  # a byte holds this many steps of a layer's range; a pixel cannot show more
NOTHING = 255  # land, or no value


@dataclass(frozen=True, eq=False)
class MapLayer:
    """One layer over all cells of the target.

    Attributes
    ----------
    key, title : str
    codes : uint8 array, shape (n,)
        0 … 250 from `low` to `high`, or class numbers; 255 where there is nothing.
    low, high : float
        What 0 and 250 stand for.
    unit : str
    palette : list of str
        A colour for each code that may occur, as #rrggbb.
    names : mapping of int to str
        For classes: code → words.
    """

    key: str
    title: str
    codes: NDArray[np.uint8]
    palette: list[str]
    low: float = 0.0
    high: float = 1.0
    unit: str = ""
    names: Mapping[int, str] = field(default_factory=dict)


def map_layers(result: Result) -> list[MapLayer]:
    """Make the layers of a result: parts, class and its odds, intervals, evidence, rim, grain size."""
    from texture.bed import EVIDENCE
    from texture.composition import find_scheme
    from texture.output import class_colours

    found, estimate, bed = result.found, result.estimate, result.bed
    active = found.target.active
    parts = found.recipe.composition.parts
    layers = [
        _steps(f"part_{i}", f"{part}, expected fraction", estimate.fractions[:, i], active)
        for i, part in enumerate(parts)
    ]
    scheme = find_scheme("folk")
    words = dict(zip(scheme.numbers, scheme.words, strict=True))
    layers.append(
        _classes(
            "texture_class",
            "most probable texture class",
            estimate.texture_class,
            active,
            words,
            class_colours(scheme),
        )
    )
    layers.append(_steps("class_probability", "probability of that class", estimate.class_probability, active))
    if found.mapper.has_variance:
        for i, part in enumerate(parts):
            width = estimate.quantiles[-1, :, i] - estimate.quantiles[0, :, i]
            layers.append(_steps(f"interval_{i}", f"{part}, width of the 90 % interval", width, active))
    layers.append(_classes("evidence", "evidence", estimate.evidence, active, EVIDENCE, EVIDENCE_COLOURS))
    layers.append(_steps("rim", "rim weight", bed.rim_weight, active))
    micrometres = np.log10(bed.surface_median_diameter * 1e6)
    low, high = float(micrometres[active].min()), float(micrometres[active].max())
    layers.append(
        _steps(
            "diameter",
            "median diameter of the first layer, log10 of µm",
            micrometres,
            active,
            low,
            max(high, low + 1e-6),
        )
    )
    if bed.hard_ground_probability is not None:
        layers.append(_steps("hard_ground", "probability of hard ground", bed.hard_ground_probability, active))
    thickness = bed.erodible_thickness.sum(axis=0)
    layers.append(
        _steps(
            "thickness", "erodible thickness, m", thickness, active, 0.0, max(float(thickness[active].max()), 1e-6), "m"
        )
    )
    for i, moved in enumerate(result.moved):
        stress = np.asarray(moved.stress_pa, dtype=np.float64)
        most = max(float(np.nanmax(np.where(active, stress, np.nan))), 1e-6)
        layers.append(
            _steps(f"stress_{i}", f"largest stress on the bed, Pa: {moved.name}", stress, active, 0.0, most, "Pa")
        )
    return layers


def _steps(
    key: str,
    title: str,
    values: NDArray[np.floating],
    active: NDArray[np.bool_],
    low: float = 0.0,
    high: float = 1.0,
    unit: str = "",
) -> MapLayer:
    share = (values - low) / (high - low)
    known = active & np.isfinite(share)
    codes = np.full(values.shape, NOTHING, dtype=np.uint8)
    codes[known] = np.round(STEPS * np.clip(share[known], 0.0, 1.0)).astype(np.uint8)
    return MapLayer(key, title, codes, _even_palette(), low, high, unit)


def _classes(
    key: str,
    title: str,
    numbers: NDArray[np.int8],
    active: NDArray[np.bool_],
    names: Mapping[int, str],
    colours: Mapping[int, tuple[int, int, int]],
) -> MapLayer:
    codes = np.where(active, numbers, NOTHING).astype(np.uint8)
    palette = [_hex(colours.get(code, (128, 128, 128))) for code in range(STEPS + 1)]
    used = {int(code): names[int(code)] for code in np.unique(codes) if code != NOTHING}
    return MapLayer(key, title, codes, palette, 0.0, float(STEPS), names=used)


def _even_palette() -> list[str]:
    from cmcrameri import cm

    colours = getattr(cm, PART_MAP)(np.linspace(0.0, 1.0, STEPS + 1))[:, :3]
    return [_hex(tuple(round(255 * float(c)) for c in colour)) for colour in colours]


def _hex(colour: tuple[int, ...]) -> str:
    return "#{:02x}{:02x}{:02x}".format(*colour)
