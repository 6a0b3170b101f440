"""Our own colours for texture classes: drawn from one perceptual map, the same on page and GeoTIFF."""

from __future__ import annotations

from collections.abc import Sequence

__all__ = ["class_colours"]


def class_colours(numbers: Sequence[int]) -> dict[int, tuple[int, int, int]]:
    """Return red, green and blue (0–255) for each class number.

    Evenly spaced along "batlow" (Crameri 2018, cmcrameri) in the order of the numbers, which run from
    fine to coarse: readable without colour vision, and near classes look near.
    """
    from cmcrameri import cm

    ordered = sorted(numbers)
    last = max(len(ordered) - 1, 1)
    return {n: tuple(round(255 * c) for c in cm.batlow(i / last)[:3]) for i, n in enumerate(ordered)}
