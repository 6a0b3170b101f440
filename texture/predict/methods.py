"""The methods by name, and how each is made."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import RecipeError
from texture.predict.inverse_distance import InverseDistance
from texture.predict.kriging import Kriging
from texture.predict.mean import WholeMean
from texture.predict.nearest import Nearest

__all__ = ["METHODS", "Method", "Predictor", "make_method"]


class Predictor(Protocol):
    """What every method can do; see `texture.predict.Kriging` for the arguments."""

    def fit(
        self,
        points: ArrayLike,
        values: ArrayLike,
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
    ) -> Predictor:
        """Take in the stations."""
        ...

    def predict(
        self, points: ArrayLike, drift: ArrayLike | None = None
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Mean and variance (NaN where the method knows none), shape (m, v)."""
        ...


@dataclass(frozen=True)
class Method:
    """One method.

    Parameters
    ----------
    make : callable
        Makes an unfitted predictor; the first argument is the covariance, None where it is not needed.
    needs_covariance : bool
    has_variance : bool
    settings : tuple of str
        What of a recipe's `[method]` it is made with.
    distance : {"plane", "in_water", "with_covariates"}
        The space that it sees places in.
    drift : bool
        Whether its mean follows drift columns.
    """

    make: Callable[..., Predictor]
    needs_covariance: bool
    has_variance: bool
    settings: tuple[str, ...] = ()
    distance: str = "plane"
    drift: bool = False


KRIGING_SETTINGS = ("neighbours", "neighbourhood", "radius_m", "at_least", "per_sector_at_most")


def _kriging(distance: str = "plane", drift: bool = False) -> Method:
    def make(covariance: Any, **settings: Any) -> Predictor:
        return Kriging(covariance, **settings)

    return Method(make, True, True, KRIGING_SETTINGS, distance, drift)


METHODS: dict[str, Method] = {
    "mean": Method(lambda covariance, **settings: WholeMean(**settings), False, False),
    "nearest": Method(lambda covariance, **settings: Nearest(**settings), False, False),
    "inverse_distance": Method(lambda covariance, **settings: InverseDistance(**settings), False, False),
    "kriging": _kriging(),
    "kriging_in_water": _kriging("in_water"),
    "kriging_with_covariates": _kriging("with_covariates"),
    "kriging_with_drift": _kriging(drift=True),
}


def make_method(name: str, covariance: Any = None, **settings: Any) -> Predictor:
    """An unfitted predictor by name.

    Examples
    --------
    >>> make_method("inverse_distance", power=3.0).power
    3.0
    """
    if name not in METHODS:
        raise RecipeError(f"method: found {name!r}, expected one of {', '.join(METHODS)}")
    method = METHODS[name]
    if method.needs_covariance and covariance is None:
        raise RecipeError(f"method {name}: needs a covariance; fit one with Covariance.fit")
    return method.make(covariance, **settings)
