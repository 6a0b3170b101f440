"""Members beside the estimate, so that a person sees that the estimate is smoother than the bed."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from texture.report.encode import Picture, picture
from texture.report.maps import Layer, draw_maps

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["members_picture", "smoother_line"]


def members_picture(result: Result) -> Picture:
    """Draw the estimate and the first four members, one row for each part that is worth a look: mud, and gravel."""
    found, members = result.found, result.members
    assert members is not None  # the caller has looked
    parts = found.recipe.composition.parts
    layers = []
    for part in (parts[0], parts[-1]):
        i = parts.index(part)
        layers.append(Layer(f"{part}, estimate", result.estimate.fractions[:, i]))
        layers += [Layer(f"{part}, member {j + 1}", shown[:, i]) for j, shown in enumerate(members.shown)]
    columns = 1 + len(members.shown)
    return picture(
        draw_maps(found.target, layers, columns=columns),
        f"The estimate beside {len(members.shown)} of {members.count} equally likely beds. " + smoother_line(result),
        f"A row of maps for {parts[0]} and one for {parts[-1]}: the estimate, then single members, which are rougher.",
    )


def smoother_line(result: Result) -> str:
    """Say by how much the estimate is smoother than a possible bed."""
    members = result.members
    assert members is not None
    shares = members.smoother(result.estimate.fractions, result.found.target.edges)
    known = [(p, s) for p, s in zip(result.found.recipe.composition.parts, shares, strict=True) if np.isfinite(s)]
    if not known:
        return "The estimate is an average, and smoother than any bed."
    words = ", ".join(f"{part} {100 * share:.0f} %" for part, share in known)
    return f"From cell to cell the estimate changes by {words} of what a member does: it is an average, and smoother than any bed."
