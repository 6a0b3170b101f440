"""How wrong the map is: folds, scores and where the samples do not reach."""

from texture.validation.folds import Folds, make_folds, matched_folds
from texture.validation.scores import score_table

__all__ = ["Folds", "make_folds", "matched_folds", "score_table"]
