"""The average of a few methods: their held-out predictions are all it needs, so that no fold is fitted again for it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import RecipeError
from texture.validation.columns import Columns
from texture.validation.spread import residual_spread

if TYPE_CHECKING:
    from texture.learning import Learned

__all__ = ["average_held_out"]

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


def average_held_out(
    members: Mapping[str, Columns], learned: Learned, scored: NDArray[np.bool_], labels: Ints
) -> tuple[Columns, dict[str, Any]]:
    """Average the held-out predictions of methods in the same columns.

    Weights, and the spread of members that know none, are those of the other folds, so that the average is as much held
    out as its members are.

    Parameters
    ----------
    members : mapping of str to Columns
    learned : Learned
        The treatment they share.
    scored : bool array, shape (n,)
        Stations that weights and spreads learn from.
    labels : int array, shape (n,)
        Folds.

    Returns
    -------
    columns : Columns
    settings : dict
        `weights` and `spreads` by name, from all folds: what `texture.predict.make_method` makes the average with.

    Raises
    ------
    RecipeError
        With fewer than two members.
    """
    if len(members) < 2:
        raise RecipeError(
            "validation.compare: an average needs two other methods with the plain treatment of zeros beside it, found "
            f"{len(members)}; add some, such as inverse_distance and forest"
        )
    found = Columns.empty(*learned.values.shape)
    for fold in np.unique(labels):
        own = np.flatnonzero(labels == fold)
        settings = _settings(members, learned, scored & (labels != fold))
        found.put(own, _mixed(members, settings, own, learned))
    return found, _settings(members, learned, scored)


def _settings(members: Mapping[str, Columns], learned: Learned, rows: NDArray[np.bool_]) -> dict[str, Any]:
    from texture.predict.average import average_weights

    errors = {name: (learned.values - columns.mean)[rows] for name, columns in members.items()}
    scale = np.nanvar(learned.values[rows], axis=0)
    scale = np.where(scale > 0.0, scale, 1.0)
    square = [float(np.nanmean(error**2, axis=0) @ (1.0 / scale)) for error in errors.values()]
    weights = dict(zip(members, average_weights(square).tolist(), strict=True))
    taken = {name: weight for name, weight in weights.items() if weight > 0.0}
    spreads = {name: residual_spread(errors[name])[0] for name in taken if np.isnan(members[name].variance).all()}
    return {"weights": taken, "spreads": spreads}


def _mixed(members: Mapping[str, Columns], settings: Mapping[str, Any], rows: Ints, learned: Learned) -> Columns:
    from texture.predict.average import mix

    weights, spreads = settings["weights"], settings["spreads"]
    means = [members[name].mean[rows] for name in weights]
    variances = [
        np.tile(spreads[name], (len(rows), 1)) if name in spreads else members[name].variance[rows] for name in weights
    ]
    mean, variance = mix(means, variances, np.array(list(weights.values())))
    # The spread of held-out errors has the samples' noise in it already.
    plain = np.zeros_like(mean)
    noise = sum((w * members[n].noise[rows] for n, w in weights.items() if n not in spreads), plain)
    correlation = np.broadcast_to(learned.structure.correlation, (len(rows), *learned.structure.correlation.shape))
    return Columns(mean, variance, noise, correlation)
