"""Colours of texture classes: every class has its own, told apart by lightness too."""

import itertools

import numpy as np
import pytest

from texture.composition import find_scheme
from texture.output import class_colours


def lightness(colour):
    """Relative luminance (WCAG 2)."""
    linear = [(c / 255 / 12.92) if c / 255 <= 0.03928 else ((c / 255 + 0.055) / 1.055) ** 2.4 for c in colour]
    return float(np.dot(linear, [0.2126, 0.7152, 0.0722]))


def test_every_class_has_a_colour_of_its_own():
    scheme = find_scheme("folk")
    colours = class_colours(scheme)
    assert set(colours) == set(scheme.numbers)
    nearest = min(np.linalg.norm(np.subtract(a, b)) for a, b in itertools.combinations(colours.values(), 2))
    assert nearest > 8.0  # of 255: apart side by side; slightly gravelly sand is near sand on purpose


@pytest.mark.parametrize(
    "words", [("sand", "muddy sand"), ("muddy sand", "sandy mud"), ("sandy mud", "mud"), ("sand", "gravel")]
)
def test_ends_of_the_triangle_differ_in_lightness(words):
    scheme = find_scheme("folk")
    colours = dict(zip(scheme.words, (class_colours(scheme)[n] for n in scheme.numbers), strict=True))
    lighter, darker = (lightness(colours[w]) for w in words)
    assert (lighter + 0.05) / (darker + 0.05) > 1.25
