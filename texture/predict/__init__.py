"""Prediction: from values at stations to values anywhere."""

from texture.predict.forest import Forest
from texture.predict.forest_kriging import ForestKriging
from texture.predict.inverse_distance import InverseDistance
from texture.predict.kriging import Kriging
from texture.predict.mean import WholeMean
from texture.predict.members import Members
from texture.predict.methods import METHODS, Predictor, make_method, solves
from texture.predict.nearest import Nearest
from texture.predict.triangulation import Triangulation
from texture.predict.tuned import TunedInverseDistance

__all__ = [
    "METHODS",
    "Forest",
    "ForestKriging",
    "InverseDistance",
    "Kriging",
    "Members",
    "Nearest",
    "Predictor",
    "Triangulation",
    "TunedInverseDistance",
    "WholeMean",
    "make_method",
    "solves",
]
