"""Small grains hide behind large ones, large ones stand out: what that does to the stress that moves them."""

from __future__ import annotations

import numpy as np

from texture.bed.cells import Bools, Floats

__all__ = ["HIDING_WORDS", "hiding_factor"]

HIDING_WORDS = {
    "none": "without hiding and exposure",
    "wu": "hiding and exposure among grains above 63 micrometres by Wu, Wang and Jia (2000)",
}

EXPONENT = -0.6


def hiding_factor(fraction: Floats, diameter_m: Floats, loose: Bools) -> Floats:
    """Factor on the critical stress of each class in a mixture.

    A grain of class i lies beside one of class j as often as j's share; it is hidden by d_j / (d_i + d_j) of
    these encounters and exposed in the rest. The factor is (exposed / hidden)^-0.6: 1 in a bed of one size, above 1
    for the small grains of a mixture, below 1 for the large.

    Parameters
    ----------
    fraction : float array, shape (k, …)
    diameter_m : float array, shape (k,)
    loose : bool array, shape (k,)
        Classes of single grains without cohesion. Shares are taken among them alone; the others keep a factor of 1, and
        so do all where there is no loose grain.

    Returns
    -------
    float array, shape (k, …)

    References
    ----------
    Wu, W., Wang, S. S. Y., Jia, Y. (2000). Nonuniform sediment transport in alluvial rivers. Journal of Hydraulic
    Research 38, 427-434.

    Examples
    --------
    Equal shares of 1 and 3 mm: the small are hidden in (1/2 + 3/4) / 2 of their encounters.

    >>> factor = hiding_factor(np.array([0.5, 0.5]), np.array([1e-3, 3e-3]), np.array([True, True]))
    >>> factor.round(4), round((0.375 / 0.625) ** -0.6, 4)
    (array([1.3587, 0.736 ]), 1.3587)
    """
    factor = np.ones_like(fraction)
    some = np.flatnonzero(loose)
    share = fraction[some]
    total = share.sum(axis=0)
    size = diameter_m[some]
    exposed = np.einsum("ij,j...->i...", size[:, None] / (size[:, None] + size), share)
    present = total > 0.0
    exposed = np.divide(exposed, total, out=np.full_like(exposed, 0.5), where=present)
    factor[some] = (exposed / (1.0 - exposed)) ** EXPONENT
    return factor
