"""The correlation models by name: their codes, their scales and where they are valid.

The formulas themselves stand once, compiled, in `texture.structure.compiled`; this table says which code and
which length each name has. With ``x = h / scale``:

=============  ======================================================  ============================
name           correlation                                             scale
=============  ======================================================  ============================
spherical      ``1 - 1.5 x + 0.5 x**3``, 0 beyond 1                     ``range_m``
cubic          ``1 - 7 x**2 + 8.75 x**3 - 3.5 x**5 + 0.75 x**7``        ``range_m``
exponential    ``exp(-x)``                                             ``range_m / 2.9957``
gaussian       ``exp(-x**2)``                                          ``range_m / 1.7308``
matern         ``2**(1-nu) / Gamma(nu) * x**nu * K_nu(x)``              nu 0.5: ``range_m / 2.9957``;
                                                                       nu 1.5: ``range_m / 4.7439``;
                                                                       nu 2.5: ``range_m / 5.9183``
=============  ======================================================  ============================

`range_m` means the same for all of them: the distance at which the correlation has fallen to 0.05, or, for the
spherical and the cubic model, where it reaches 0. Formulas: Chilès & Delfiner (2012), section 2.5; Matérn: Stein
(1999), section 2.7.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

__all__ = ["MODELS", "Model", "model_code", "scale_factor"]

SPHERICAL, CUBIC, EXPONENTIAL, GAUSSIAN, MATERN_3_2, MATERN_5_2, MATERN = range(7)


@dataclass(frozen=True)
class Model:
    """What the program must know of a model beside its formula.

    Parameters
    ----------
    code : int
        The integer the compiled code branches on.
    dimensions : int or None
        The largest number of dimensions in which it is positive definite; None when in all.
    """

    code: int
    dimensions: int | None = None


MODELS = {
    "spherical": Model(SPHERICAL, 3),
    "cubic": Model(CUBIC, 3),
    "exponential": Model(EXPONENTIAL),
    "gaussian": Model(GAUSSIAN),
    "matern": Model(MATERN),
}

# Half-integer smoothness has a closed form that costs one exponential instead of a Bessel function.
_CLOSED_MATERN = {0.5: EXPONENTIAL, 1.5: MATERN_3_2, 2.5: MATERN_5_2}


def model_code(name: str, smoothness: float | None) -> int:
    """Integer by which the compiled code knows a model."""
    if name == "matern" and smoothness in _CLOSED_MATERN:
        return _CLOSED_MATERN[smoothness]
    return MODELS[name].code


@lru_cache(maxsize=256)
def scale_factor(name: str, smoothness: float | None) -> float:
    """Range over scale: the `x` at which the correlation is 0.05 (or 0 for models that reach it).

    Examples
    --------
    >>> round(scale_factor("exponential", None), 4)
    2.9957
    >>> round(scale_factor("matern", 1.5), 4)
    4.7439
    """
    if name in ("spherical", "cubic"):
        return 1.0
    if name == "gaussian":
        return math.sqrt(math.log(20.0))
    if name == "exponential" or smoothness == 0.5:
        return math.log(20.0)
    from scipy.optimize import brentq
    from scipy.special import gammaln, kv

    nu = float(smoothness or 0.5)

    def above(x: float) -> float:
        return float((1.0 - nu) * math.log(2.0) - gammaln(nu) + nu * math.log(x) + math.log(kv(nu, x))) - math.log(0.05)

    # The crossing moves from 2 (nu 0.1) to 14 (nu 20) scales; the bracket is wider on both sides.
    return float(brentq(above, 1e-3, 60.0, xtol=1e-14, rtol=1e-14))
