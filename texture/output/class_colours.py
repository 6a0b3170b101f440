"""Our own colours for texture classes, from what a class is made of: the same on page and GeoTIFF."""

from __future__ import annotations

import numpy as np

from texture.composition import Scheme, classify

__all__ = ["class_colours"]

# Mud dark blue, sand pale yellow, gravel rust: far apart in lightness, so that they stay apart without colour vision.
ANCHORS = np.array([[28, 50, 96], [247, 229, 170], [176, 62, 40]], dtype=np.float64)
STEPS = 50  # of the triangle that a class is averaged over: every class of the scheme holds several points


def class_colours(scheme: Scheme) -> dict[int, tuple[int, int, int]]:
    """Return red, green and blue (0–255) for each class number of a scheme of mud, sand and gravel.

    A class has the colour of its middle, mixed from dark blue for mud, pale yellow for sand and rust for gravel; near classes look
    near. Gravel counts by its square root: as a trace it would not be seen.
    """
    sand, gravel = np.meshgrid(np.linspace(0, 1, STEPS + 1), np.linspace(0, 1, STEPS + 1) ** 2)
    inside = sand + gravel <= 1.0
    mud = np.maximum(1.0 - sand - gravel, 0.0)  # rounding may leave a trace less than none
    fractions = np.column_stack([mud[inside], sand[inside], gravel[inside]])
    codes = classify(fractions, scheme)
    weights = fractions * [1.0, 1.0, 0.0] + np.sqrt(fractions) * [0.0, 0.0, 1.0]
    colours = (weights / weights.sum(axis=1, keepdims=True)) @ ANCHORS
    return {
        number: tuple(round(c) for c in colours[codes == code].mean(axis=0))
        for number, code in zip(scheme.numbers, scheme.codes, strict=True)
        if (codes == code).any()
    }
