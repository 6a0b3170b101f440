"""From a map of parts to a bed that a model can start from: grains, layers, rim, land."""

from texture.bed.bed import EVIDENCE, Account, Bed
from texture.bed.build import make_bed, strength_known
from texture.bed.classes import ClassProperties, class_properties
from texture.bed.cores import CoreLayer
from texture.bed.hiding import HIDING_WORDS
from texture.bed.inventory import Stock
from texture.bed.mixture_packing import PACKING_WORDS
from texture.bed.mobility import Condition, Moved, moved_by
from texture.bed.packing import dry_density, porosity
from texture.bed.precision import single_fractions
from texture.bed.readiness import BedArrays, Check, check_bed
from texture.bed.roughness import skin_roughness_length
from texture.bed.settling import settling_velocity
from texture.bed.threshold import critical_stress
from texture.bed.water import Water
from texture.bed.waves import wave_current_stress, wave_stress

__all__ = [
    "EVIDENCE",
    "HIDING_WORDS",
    "PACKING_WORDS",
    "Account",
    "Bed",
    "BedArrays",
    "Check",
    "ClassProperties",
    "Condition",
    "CoreLayer",
    "Moved",
    "Stock",
    "Water",
    "check_bed",
    "class_properties",
    "critical_stress",
    "dry_density",
    "make_bed",
    "moved_by",
    "porosity",
    "settling_velocity",
    "single_fractions",
    "skin_roughness_length",
    "strength_known",
    "wave_current_stress",
    "wave_stress",
]
