"""The methods by name, in the order of how much each uses of what is known, and how each is made."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import RecipeError
from texture.predict.average import Average
from texture.predict.forest import Forest
from texture.predict.forest_kriging import ForestKriging
from texture.predict.inverse_distance import InverseDistance
from texture.predict.kriging import Kriging
from texture.predict.mean import WholeMean
from texture.predict.nearest import Nearest
from texture.predict.triangulation import Triangulation
from texture.predict.tuned import TunedInverseDistance

__all__ = ["METHODS", "Method", "Predictor", "make_method", "solves"]


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
        What of a recipe's `[method]` it is made with; "seed" is the recipe's own.
    distance : {"plane", "in_water", "with_covariates"}
        The space that it sees places in.
    drift : bool
        Whether its mean follows drift columns.
    variance_of_sample : bool
        Whether its variance is that of a further sample, noise of analysis and offset of survey included.
    """

    make: Callable[..., Predictor]
    needs_covariance: bool
    has_variance: bool
    settings: tuple[str, ...] = ()
    distance: str = "plane"
    drift: bool = False
    variance_of_sample: bool = False


KRIGING_SETTINGS = ("neighbours", "neighbourhood", "radius_m", "at_least", "per_sector_at_most")


def _kriging(distance: str = "plane", drift: bool = False) -> Method:
    def make(covariance: Any, **settings: Any) -> Predictor:
        return Kriging(covariance, **settings)

    return Method(make, True, True, KRIGING_SETTINGS, distance, drift)


def _inverse_distance(covariance: Any, **settings: Any) -> Predictor:
    return InverseDistance(**settings) if settings else TunedInverseDistance()


def _average(
    covariance: Any, weights: Mapping[str, float], spreads: Mapping[str, Any] | None = None, **settings: Any
) -> Predictor:
    members = [
        make_method(name, covariance, **{k: v for k, v in settings.items() if k in METHODS[name].settings})
        for name in weights
    ]
    return Average(members, list(weights.values()), [(spreads or {}).get(name) for name in weights])


METHODS: dict[str, Method] = {
    "mean": Method(lambda covariance, **settings: WholeMean(**settings), False, False),
    "nearest": Method(lambda covariance, **settings: Nearest(**settings), False, False),
    "triangulation": Method(lambda covariance, **settings: Triangulation(**settings), False, False),
    "inverse_distance": Method(_inverse_distance, False, False),
    "kriging": _kriging(),
    "kriging_in_water": _kriging("in_water"),
    "kriging_with_covariates": _kriging("with_covariates"),
    "kriging_with_drift": _kriging(drift=True),
    "forest": Method(
        lambda covariance, **settings: Forest(**settings), False, True, ("seed",), drift=True, variance_of_sample=True
    ),
    "forest_kriging": Method(
        lambda covariance, **settings: ForestKriging(**settings), False, True, ("neighbours", "seed"), drift=True
    ),
    "average": Method(_average, True, True, (*KRIGING_SETTINGS, "seed")),
}


def solves(name: str) -> bool:
    """Tell whether a method is a kriging system, whose variance follows its covariance alone."""
    return name.startswith("kriging")


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
