"""Going on with a validation that was interrupted: which journal belongs to a run, and when it has served."""

from __future__ import annotations

from typing import TYPE_CHECKING

from texture.output.journal import FoldJournal, fingerprint
from texture.recipe.paths import named_files

if TYPE_CHECKING:
    from pathlib import Path

    from texture.observations import Observations
    from texture.recipe import Recipe
    from texture.targets import Target

AFTER = {"title", "output", "outputs", "bed", "rim", "ensemble", "mobility", "inventory"}
"""Blocks of the recipe that no fold follows from."""

__all__ = ["close_journal", "open_journal"]


def open_journal(output: Path, recipe: Recipe, observations: Observations, target: Target) -> FoldJournal:
    """The journal of a run's folds in its output folder, keyed by everything that they follow from.

    Settings of the bed, the rim or the outputs may change in between: folds do not follow from them.
    """
    said = [getattr(observations, name) for name in observations.__dataclass_fields__]
    mapped = [target.longitude, target.latitude, target.active]
    blocks = recipe.model_dump_json(exclude=AFTER)
    return FoldJournal(output, fingerprint([blocks], [*said, *mapped], named_files(recipe)))


def close_journal(output: Path) -> None:
    """Remove what the results have made needless."""
    FoldJournal(output, "").clear()
