"""Prediction: from values at stations to values anywhere."""

from texture.predict.inverse_distance import InverseDistance
from texture.predict.kriging import Kriging
from texture.predict.mean import WholeMean
from texture.predict.members import Members
from texture.predict.methods import METHODS, Predictor, make_method
from texture.predict.nearest import Nearest

__all__ = ["METHODS", "InverseDistance", "Kriging", "Members", "Nearest", "Predictor", "WholeMean", "make_method"]
