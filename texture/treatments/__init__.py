"""What is done with zeros and parts below a limit: from observations to the columns that are kriged, and back.

A treatment turns what the stations say into columns of numbers with their noise, and what is predicted of the
columns into expected fractions, quantiles and class odds. It learns nothing by itself: `texture.learning.learn` fits the
columns' structure, anew in each fold, and every treatment is used in the same way.

``replace``   parts below a limit become 0.65 × limit; the limit may lie above the laboratory's
``censor``    they lie somewhere below the limit, as far as the neighbours say
``presence``  gravel is there or not, and how much of it only where it is
``shares``    the tree's shares as they are, without logarithms: the control
"""

from texture.treatments.candidates import LIMIT_STEPS, candidates, plain_treatment
from texture.treatments.censor import Censor
from texture.treatments.columned import Columned
from texture.treatments.presence import Presence
from texture.treatments.replace import Replace, Shares, Treatment

__all__ = [
    "LIMIT_STEPS",
    "Censor",
    "Columned",
    "Presence",
    "Replace",
    "Shares",
    "Treatment",
    "candidates",
    "plain_treatment",
]
