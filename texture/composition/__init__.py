"""Fractions and log-ratio coordinates, size curves, texture classes and words for them."""

from texture.composition.calibrated import calibrate_words
from texture.composition.censoring import censored_site, censoring_bounds
from texture.composition.classes import ClassOdds, class_numbers, class_odds, classify
from texture.composition.closure import (
    centre,
    close,
    clr,
    distance,
    perturb,
    power,
    total_variance,
    variation_matrix,
)
from texture.composition.cumulative import parts_from_weights, percentiles_from_weights
from texture.composition.curves import SizeCurve
from texture.composition.inexact import from_intervals, from_median, from_mud_and_sand
from texture.composition.logratio import LogRatio
from texture.composition.partition import Partition, default_tree
from texture.composition.presence import presence_expected, presence_forward
from texture.composition.scales import Scale
from texture.composition.schemes import Scheme, find_scheme, scheme_names
from texture.composition.sizes import grade, m_from_phi, phi_from_m
from texture.composition.statistics import FolkWard, Moments
from texture.composition.words import Described, class_moments, read_words
from texture.composition.zeros import replace

__all__ = [
    "ClassOdds",
    "Described",
    "FolkWard",
    "LogRatio",
    "Moments",
    "Partition",
    "Scale",
    "Scheme",
    "SizeCurve",
    "calibrate_words",
    "censored_site",
    "censoring_bounds",
    "centre",
    "class_moments",
    "class_numbers",
    "class_odds",
    "classify",
    "close",
    "clr",
    "default_tree",
    "distance",
    "find_scheme",
    "from_intervals",
    "from_median",
    "from_mud_and_sand",
    "grade",
    "m_from_phi",
    "parts_from_weights",
    "percentiles_from_weights",
    "perturb",
    "phi_from_m",
    "power",
    "presence_expected",
    "presence_forward",
    "read_words",
    "replace",
    "scheme_names",
    "total_variance",
    "variation_matrix",
]
