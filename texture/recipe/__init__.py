"""What the user asked for: one frozen, typed tree of settings, checked once and then trusted.

One module holds one block of the recipe. Every setting that stands there acts; there are no reserved words.
Descriptions are kept beside the fields so that help, reference and code cannot part. `file` reads a TOML file
with its overrides into the tree.
"""

from texture.recipe.bed import Bed, Layer, WaterSettings
from texture.recipe.classes import BedClass, Erosion, Grain, Packing, WaterColumn
from texture.recipe.composition import Composition
from texture.recipe.covariate import Covariate
from texture.recipe.ensemble import Ensemble
from texture.recipe.further import FurtherTarget
from texture.recipe.intake import Intake, Void
from texture.recipe.inventory import Inventory
from texture.recipe.method import Method, MethodName
from texture.recipe.mobility import Mobility
from texture.recipe.outputs import Outputs
from texture.recipe.quantities import Quantity
from texture.recipe.report import Report
from texture.recipe.rim import Rim
from texture.recipe.samples import COLUMN_ROLES, Join, Samples
from texture.recipe.sensitivity import Sensitivity, Vary
from texture.recipe.settings import Settings
from texture.recipe.target import TargetSettings
from texture.recipe.validation import Validation
from texture.recipe.whole import Recipe, further_recipes, with_method
from texture.recipe.zones import Zone

__all__ = [
    "COLUMN_ROLES",
    "Bed",
    "BedClass",
    "Composition",
    "Covariate",
    "Ensemble",
    "Erosion",
    "FurtherTarget",
    "Grain",
    "Intake",
    "Inventory",
    "Join",
    "Layer",
    "Method",
    "MethodName",
    "Mobility",
    "Outputs",
    "Packing",
    "Quantity",
    "Recipe",
    "Report",
    "Rim",
    "Samples",
    "Sensitivity",
    "Settings",
    "TargetSettings",
    "Validation",
    "Vary",
    "Void",
    "WaterColumn",
    "WaterSettings",
    "Zone",
    "further_recipes",
    "with_method",
]
