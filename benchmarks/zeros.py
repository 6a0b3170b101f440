"""What each treatment of zeros is worth where the truth is known: simulated beds, mapped from 260 stations on one thread.

A bed's log-ratios are Gaussian with an exponential covariance. Gravel is absent from patches that a third such field cuts
out (``patches``), or so small that a share of it lies below the laboratory's limit (``small``); the laboratory writes
three decimals, and 0 below the limit.

A map of gravel that fills a few per cent of the ground from 260 stations is off by luck alone, whatever is done with zeros. How
much is luck is what the `oracle` shows: the expected fractions given all hidden fields at the stations, under the
true model. Nothing does better, and over many fields its mean error is 0. What a map's mean error has beyond the
oracle's is its own.

    OMP_NUM_THREADS=1 NUMBA_NUM_THREADS=1 python -m benchmarks.zeros --seeds 21 22 23
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np
from numpy.typing import NDArray

from texture.choosing import fit_candidates
from texture.composition import LogRatio, presence_expected
from texture.mapping import make_mapper
from texture.observations import Observations
from texture.progress import Silent
from texture.recipe import Recipe
from texture.validate import validate_methods

Floats = NDArray[np.float64]
PARTS = ("mud", "sand", "gravel")
EXTENT_M, RANGE_M, LIMIT, CELLS, STATIONS = 20_000.0, 9_000.0, 0.005, 24, 260
FIELDS = [("patches", 0.0), ("patches", 0.3), ("patches", 0.7), ("small", 0.3), ("small", 0.7)]


@dataclass(frozen=True, eq=False)
class Field:
    """One simulated bed.

    Attributes
    ----------
    cells, truth : float arrays, shapes (m, 2) and (m, 3)
        Places of cells in metres, and the fractions there.
    points, measured : float arrays, shapes (n, 2) and (n, 3)
        Stations, and what the laboratory wrote.
    oracle : float array, shape (m, 3)
        Expected fractions of cells, all hidden fields at the stations and the true model given.
    """

    cells: Floats
    truth: Floats
    points: Floats
    measured: Floats
    oracle: Floats


@dataclass(frozen=True, eq=False)
class Outcome:
    """One treatment's map of one bed.

    Attributes
    ----------
    key : (str, float)
        Class and limit of the treatment.
    held_out : float
        Error by held-out stations, as in `texture.zero_choice.Tried`.
    chosen, balanced : bool
    rmse, mean_error : float arrays, shape (3,)
        Against the true cells; mean errors are relative to each part's true mean.
    whole : float
        Square root of the sum of squared RMSE, each relative to the part's standard deviation.
    beyond_luck : float array, shape (3,)
        Mean error less that of the oracle.
    """

    key: tuple[str, float]
    held_out: float
    chosen: bool
    balanced: bool
    rmse: Floats
    mean_error: Floats
    whole: float
    beyond_luck: Floats


def simulate(kind: str, share: float, seed: int) -> Field:
    """Draw a bed with a share of the gravel absent (``patches``) or below the limit (``small``)."""
    rng = np.random.default_rng(seed)
    line = (np.arange(CELLS) + 0.5) / CELLS * EXTENT_M
    cells = np.array([(x, y) for x in line for y in line])
    places = np.vstack([cells, rng.uniform(0, EXTENT_M, (STATIONS, 2))])
    distance = np.sqrt(((places[:, None] - places) ** 2).sum(axis=2))
    covariance = np.exp(-2.9957 * distance / RANGE_M)
    hidden = np.linalg.cholesky(covariance + 1e-9 * np.eye(len(places))) @ rng.normal(size=(len(places), 3))
    m = len(cells)
    weights = np.linalg.solve(covariance[m:, m:] + 1e-9 * np.eye(STATIONS), covariance[m:, :m]).T
    told = weights @ hidden[m:]
    left = np.maximum(1.0 - (weights * covariance[:m, m:]).sum(axis=1), 1e-12)
    scale, shift = np.array([1.2, 0.8 if kind == "patches" else 1.5]), np.array([-0.5, -0.7])
    mud = 1 / (1 + np.exp(0.5 - 1.2 * hidden[:, 0]))
    present, odds = np.ones(len(places), dtype=bool), np.ones(m)
    if kind == "small":
        # Shifted until the share of gravel below the limit is as wanted.
        edge = np.log(LIMIT / np.maximum(1 - mud - LIMIT, 1e-9))
        shift[1] = -np.quantile(1.5 * hidden[:, 1] - edge, share)
    elif share > 0.0:
        from scipy.special import ndtr

        threshold = np.quantile(hidden[:, 2], share)
        present, odds = hidden[:, 2] >= threshold, ndtr((told[:, 2] - threshold) / np.sqrt(left))
    logratio = LogRatio(PARTS)
    truth = presence_expected(logratio, logratio.inverse(shift + scale * hidden[:, :2]), present.astype(np.float64))
    expected = logratio.expected(shift + scale * told[:, :2], scale**2 * left[:, None])
    measured = truth[m:].copy()
    measured[measured[:, 2] < LIMIT, 2] = 0.0
    measured = np.round(measured, 3)
    measured[:, 1] = np.round(1 - measured[:, 0] - measured[:, 2], 3)
    return Field(cells, truth[:m], places[m:], measured, presence_expected(logratio, expected, odds))


def recipe(**composition: object) -> Recipe:
    """A recipe with eight random folds and nothing to compare with."""
    target = {"bounds": [0.0, 0.0, 1.0, 1.0], "cell_size": 0.5, "crs": "EPSG:4326"}
    validation = {"folds": "random", "count": 8, "compare": []}
    return Recipe.model_validate(
        {"samples": [{"file": "a.csv"}], "target": target, "composition": composition, "validation": validation}
    )


def observations(points: Floats, fractions: Floats) -> Observations:
    """Exact stations of one survey, to three decimals."""
    n, unknown = len(points), np.full((len(points), 3), np.nan)
    return Observations(
        points, fractions, np.full(n, 0.001), unknown, unknown.copy(), np.full(n, "", dtype="<U8"), np.full(n, np.nan),
        np.zeros(n, dtype=np.int64), np.ones(n, dtype=bool), np.arange(n), np.full(n, np.nan), np.zeros(n),
        np.ones(n, dtype=np.int64), unknown.copy(),
    )  # fmt: skip


def outcomes(field: Field) -> list[Outcome]:
    """Every treatment that a recipe tries, compared on folds as in a build, and its map held against the truth."""
    settings, said = recipe(), observations(field.points, field.measured)
    cells = field.cells
    target = SimpleNamespace(active=np.ones(len(cells), dtype=bool), longitude=cells[:, 0], latitude=cells[:, 1])
    plane = SimpleNamespace(to_metres=lambda x, y: np.column_stack([x, y]))
    plain, treated = fit_candidates(said, settings)
    validation = validate_methods(said, target, plane, plain, treated, settings, Silent())  # type: ignore[arg-type]
    luck = (field.oracle - field.truth).mean(axis=0)
    found = []
    for tried, learned in zip(validation.tried, treated, strict=True):
        mapper = make_mapper("kriging", learned, settings.method)
        error = mapper.expected(*mapper.predict(cells)) - field.truth
        mean, rmse = error.mean(axis=0), np.sqrt((error**2).mean(axis=0))
        whole = float(np.sqrt((rmse**2 / field.truth.var(axis=0)).sum()))
        key = (type(tried.treatment).__name__, tried.treatment.limit)
        of = field.truth.mean(axis=0)
        found.append(
            Outcome(key, tried.error, tried.chosen, tried.balanced, rmse, mean / of, whole, (mean - luck) / of)
        )
    return found


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--seeds", type=int, nargs="+", default=[21, 22, 23])
    options = parser.parse_args()
    print("case seed treatment limit | held-out error | RMSE against the best | gravel: mean error, beyond luck")
    picked: dict[tuple[str, float], list[tuple[float, float, float]]] = {case: [] for case in FIELDS}
    for case in FIELDS:
        for seed in options.seeds:
            field = simulate(*case, seed)
            run = outcomes(field)
            best = min(o.whole for o in run)
            for o in run:
                name, mark = f"{o.key[0]:8s} {o.key[1]:5g}", "*" if o.chosen else "" if o.balanced else "out of balance"
                print(
                    f"{case[0]} {case[1]:3.1f} {seed:3d} {name} | {o.held_out:6.3f} | {o.whole / best:6.3f} | "
                    f"{o.mean_error[2]:+.3f} {o.beyond_luck[2]:+.3f} {mark}",
                    flush=True,
                )
                if o.chosen:
                    picked[case].append((o.whole / best, o.mean_error[2], o.beyond_luck[2]))
    print("\nthe one that held-out error picks | RMSE: mean, worst | mean error ± | beyond luck ±, largest")
    for case, rows in picked.items():
        ratio, mean_error, beyond = np.array(rows).T
        se = [v.std(ddof=1) / np.sqrt(len(v)) if len(v) > 1 else np.nan for v in (mean_error, beyond)]
        print(
            f"{case[0]} {case[1]:3.1f} | {ratio.mean():.3f} {ratio.max():.3f} | {mean_error.mean():+.3f} ± {se[0]:.3f} | "
            f"{beyond.mean():+.3f} ± {se[1]:.3f}, {np.abs(beyond).max():.3f}"
        )


if __name__ == "__main__":
    main()
