"""Seconds for a million compositions of three parts: forward, inverse, expected, quantiles and class."""

import argparse
import time
from collections.abc import Callable

import numpy as np

from texture.composition import LogRatio, class_odds, classify


def composition(rows: int = 1_000_000, seed: int = 1) -> dict[str, float]:
    """Time each step on `rows` rows once compiled.

    Returns
    -------
    dict of str to float
        Seconds of each step; ``total`` adds up forward, inverse, expected (correlated) and classify.
    """
    rng = np.random.default_rng(seed)
    logratio = LogRatio(["mud", "sand", "gravel"])
    fractions = rng.dirichlet([1.0, 1.0, 0.3], rows)
    mean = rng.normal(0.0, 2.0, (rows, 2))
    variance = rng.uniform(0.2, 5.0, (rows, 2))
    covariance = np.zeros((rows, 2, 2))
    covariance[:, [0, 1], [0, 1]] = variance
    covariance[:, [0, 1], [1, 0]] = 0.4 * np.sqrt(variance.prod(axis=1))[:, None]
    some = slice(0, max(rows // 20, 1))  # quantiles and odds cost more: a twentieth of the rows
    steps: dict[str, Callable[[], object]] = {
        "forward": lambda: logratio.forward(fractions),
        "inverse": lambda: logratio.inverse(mean),
        "expected_uncorrelated": lambda: logratio.expected(mean, variance),
        "expected": lambda: logratio.expected(mean, covariance),
        "classify": lambda: classify(fractions),
        "three_quantiles_of_a_twentieth": lambda: logratio.quantiles(mean[some], covariance[some], [0.05, 0.5, 0.95]),
        "class_odds_of_a_twentieth": lambda: class_odds(logratio, mean[some], covariance[some], trace=0.01),
    }
    # Compile first: the compiler's time is paid once per machine.
    logratio.expected(mean[:2], variance[:2])
    logratio.expected(mean[:2], covariance[:2])
    logratio.quantiles(mean[:2], covariance[:2], [0.5])
    class_odds(logratio, mean[:2], covariance[:2])
    seconds: dict[str, float] = {}
    for name, run in steps.items():
        start = time.perf_counter()
        run()
        seconds[name] = time.perf_counter() - start
    seconds["total"] = sum(seconds[name] for name in ("forward", "inverse", "expected", "classify"))
    return seconds


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rows", type=int, default=1_000_000)
    for step, value in composition(parser.parse_args().rows).items():
        print(f"{step:32s} {value:8.3f} s")
