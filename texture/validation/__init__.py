"""How wrong the map is: folds, scores and where the samples do not reach."""

from texture.validation.folds import Folds, make_folds, matched_folds
from texture.validation.held_out import HeldOut, score_table

__all__ = ["Folds", "HeldOut", "make_folds", "matched_folds", "score_table"]
