"""The treatments that a recipe allows, for held-out error to pick from."""

from __future__ import annotations

from dataclasses import replace as changed
from typing import TYPE_CHECKING

from texture.composition import LogRatio
from texture.errors import RecipeError
from texture.treatments.censor import Censor
from texture.treatments.presence import Presence
from texture.treatments.replace import Replace, Shares, Treatment

if TYPE_CHECKING:
    from texture.observations import Observations
    from texture.recipe import Composition

__all__ = ["LIMIT_STEPS", "candidates", "plain_treatment"]

LIMIT_STEPS = (1.0, 4.0, 10.0)
"""Limits that replacement is tried with, in laboratory limits: 0.005, 0.02 and 0.05 by default."""
HIGHEST_LIMIT = 0.15
"""No limit above this is tried: near a third, replaced parts would no longer be the small ones."""
LEAST_OF_EACH = 10
"""Stations with and without gravel from which presence can be mapped: fewer show no structure in a fold."""


def plain_treatment(composition: Composition) -> Treatment:
    """Replacement at the laboratory's limit in the recipe's coordinates, or their shares."""
    make = Shares if composition.logratio == "shares" else Replace
    return make(LogRatio(composition.parts, composition.logratio, composition.tree, composition.detection_limit))


def candidates(composition: Composition, observations: Observations, has_variance: bool) -> list[Treatment]:
    """The treatments that a recipe allows, the simplest first; held-out error picks where there are several.

    Replacement is tried at higher limits where they would touch a measured part, censoring and presence where a part lies
    below the laboratory's limit; where none does, that limit alone stands beside the shares.

    Parameters
    ----------
    composition : Composition
        Of the recipe.
    observations : Observations
    has_variance : bool
        Whether the map's method has a variance; censoring needs one.

    Raises
    ------
    RecipeError
        Censoring with a method that has no variance.
    """
    plain = plain_treatment(composition)
    zeros, limit = composition.zeros, composition.detection_limit
    tree = composition.logratio == "tree"
    if zeros == "censor":
        if not has_variance:
            raise RecipeError(
                'composition.zeros = "censor" needs a method with a variance, such as method.name = "kriging"'
            )
        return [Censor(plain.logratio)]
    if zeros == "presence":
        return [Presence(plain.logratio)]
    known = observations.fractions[observations.exact]
    steps = [s for s in LIMIT_STEPS if s == 1.0 or (s * limit <= HIGHEST_LIMIT and bool((known < s * limit).any()))]
    replaced = [plain.with_limit(s * limit) for s in steps]
    if zeros == "replace" or isinstance(plain, Shares):
        return replaced if zeros == "replace" else [plain]
    found: list[Treatment] = [
        *replaced,
        Shares(changed(plain.logratio, kind="shares", tree=composition.tree, reference=None)),
    ]
    gravel = known[:, composition.parts.index("gravel")]
    absent = gravel < limit
    if tree and min(int(absent.sum()), int((gravel >= limit).sum())) >= LEAST_OF_EACH:
        found.append(Presence(plain.logratio))
    if has_variance and composition.logratio in ("tree", "alr") and bool((known < limit).any()):
        found.append(Censor(plain.logratio))
    return found
