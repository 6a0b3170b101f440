"""The cases of a sensitivity set: which settings each has, known before any work."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.bed.sensitivity import CaseBed, OrderError, change_bed
from texture.errors import BedError, RecipeError
from texture.recipe import Recipe, Sensitivity, Vary

if TYPE_CHECKING:
    from texture.targets import Target

__all__ = ["Case", "CasePlan", "MapSettings", "make_cases", "plan_cases"]

Floats = NDArray[np.float64]
TRIES = 50
"""Batches of samples that are drawn before an order that nearly no sample keeps is given up."""


@dataclass(frozen=True)
class MapSettings:
    """What of a case changes the map that the bed is made from; 0, 1 and None change nothing."""

    detection_limit: float | None = None
    covariance_range: float = 1.0
    shift: float = 0.0
    member: int | None = None
    control: str | None = None


@dataclass(frozen=True, eq=False)
class Case:
    """One bed of the set.

    Attributes
    ----------
    number : int
        From 1.
    settings : dict of Vary to value
        What differs from the recipe; a factor where the vary has factors.
    made_by : CaseBed
    map_settings : MapSettings
    """

    number: int
    settings: dict[Vary, Any]
    made_by: CaseBed
    map_settings: MapSettings

    @property
    def name(self) -> str:
        """The case in a few words."""
        words = [
            f"{v.label} {'× ' if v.factors is not None else ''}{_short(value)}" for v, value in self.settings.items()
        ]
        return ", ".join(words) or "as in the recipe"

    @property
    def attributes(self) -> dict[str, Any]:
        """Global attributes of the case's file."""
        found: dict[str, Any] = {"case": self.number, "case_settings": self.name}
        for vary, value in self.settings.items():
            found[f"case_{vary.label}{'_factor' if vary.factors is not None else ''}"] = value
        if self.map_settings.shift:
            found["case_note"] = (
                "the estimate moved everywhere at once, as wrong the same way as it may be: not a member, and no more than a map of "
                "a quantile itself a possible bed"
            )
        return found


@dataclass(frozen=True)
class CasePlan:
    """What a set will be, before it is made.

    Attributes
    ----------
    cases : tuple of Case
    left_out : int
        Combinations in which classes would change places.
    bytes_each, seconds : float
        Largest size of a case's file, and about how long all of them take once the map is fitted.
    """

    cases: tuple[Case, ...]
    left_out: int
    bytes_each: float
    seconds: float

    def summary(self) -> dict[str, Any]:
        """The plan as an object."""
        return {
            "cases": len(self.cases), "left_out": self.left_out, "bytes": round(self.bytes_each * len(self.cases)),
            "seconds": round(self.seconds, 1), "settings": {str(c.number): c.name for c in self.cases},
        }  # fmt: skip

    def lines(self) -> list[str]:
        """Lines for a person."""
        head = f"  cases       {len(self.cases)}, each at most {_size(self.bytes_each)}, {_size(self.bytes_each * len(self.cases))} in all; about {self.seconds:,.0f} s once the map is fitted"
        if self.left_out:
            head += f"; {self.left_out} left out, in which classes would change places"
        width = len(str(len(self.cases)))
        return [head, *(f"    {case.number:0{width}d}  {case.name}" for case in self.cases)]


def _size(count: float) -> str:
    return (
        f"{count / 1e3:,.0f} kB"
        if count < 1e6
        else f"{count / 1e6:,.1f} MB"
        if count < 1e9
        else f"{count / 1e9:,.1f} GB"
    )


def _short(value: Any) -> str:
    return value if isinstance(value, str) else f"{value:.4g}"


def make_cases(recipe: Recipe) -> tuple[tuple[Case, ...], int]:
    """List the cases of a recipe's sensitivity set, and count those left out because classes would change places.

    Raises
    ------
    RecipeError
        Where there is no such block, more cases than allowed, a member beyond the ensemble, a change alone that turns an order
        round, or a design in which nearly every sample does.
    BedError
        What cannot be changed; see `texture.bed.sensitivity.change_bed`.
    """
    block = recipe.sensitivity
    if block is None:
        raise RecipeError("the recipe has no [sensitivity]; say there what is to vary")
    _check(recipe, block)
    found: list[Case] = []
    left_out = 0
    sampled = block.design in ("latin_hypercube", "sobol")
    for settings in _SAMPLES[block.design](block, recipe.seed):
        try:
            made_by = change_bed(recipe.bed, recipe.rim, settings, recipe.composition.parts)
        except OrderError as error:
            if block.design == "one_at_a_time":
                changed = ", ".join(v.label for v in settings)
                raise RecipeError(f"sensitivity: {changed}: {error}; choose smaller steps") from error
            left_out += 1
            continue
        settings = {v: int(value) if v.what == "member" else value for v, value in settings.items()}
        found.append(Case(len(found) + 1, settings, made_by, _map_settings(settings)))
        if sampled and len(found) == block.cases:
            break
    if (sampled and len(found) < (block.cases or 0)) or not found:
        raise RecipeError(
            f"sensitivity: of {left_out + len(found)} {'samples' if sampled else 'combinations'} only {len(found)} keep the order of "
            "the classes (what settles slower, what is finer); vary by less, or vary classes together"
        )
    return tuple(found), left_out


def _check(recipe: Recipe, block: Sensitivity) -> None:
    from texture.predict import solves

    count = {"one_at_a_time": 1 + sum(len(_levels(v)) for v in block.vary), "all": int(np.prod([float(len(_levels(v))) for v in block.vary]))}.get(
        block.design, block.cases or 0
    )  # fmt: skip
    if count > block.at_most:
        raise RecipeError(
            f'sensitivity: design = "{block.design}" makes {count:,} cases, more than at_most = {block.at_most}; '
            f"set sensitivity.at_most = {count} to say yes, or sample them (latin_hypercube, sobol)"
        )
    for vary in block.vary:
        if vary.what == "member":
            most = max(float(v) for v in (vary.values or vary.range or ()))
            if most > recipe.ensemble.members:
                raise RecipeError(
                    f"sensitivity: member {most:g} is beyond ensemble.members = {recipe.ensemble.members}; ask for more members, "
                    "or vary fewer"
                )
        if vary.what in ("member", "shift", "covariance_range") and not solves(recipe.method.tried_with):
            raise RecipeError(
                f'sensitivity: {vary.what} needs kriging; method.name = "{recipe.method.name}" is none; use "kriging"'
            )
        if vary.what == "detection_limit":
            limits = [recipe.composition.detection_limit * f for f in vary.factors or ()] or [
                float(v) for v in (vary.values or vary.range or ())
            ]
            if max(limits) > MOST_LIMIT:
                raise RecipeError(
                    f"sensitivity: a detection limit of {max(limits):g} would replace every part; expected at most {MOST_LIMIT}"
                )


MOST_LIMIT = 0.33


def _map_settings(settings: Mapping[Vary, Any]) -> MapSettings:
    found: dict[str, Any] = {}
    for vary, value in settings.items():
        if vary.what == "detection_limit":
            # A factor multiplies the limit that the map's treatment took, which only the fit knows: kept as a negative number.
            found["detection_limit"] = -float(value) if vary.factors is not None else float(value)
        elif vary.what == "member":
            found["member"] = int(value)
        elif vary.what in ("covariance_range", "shift", "control"):
            found[vary.what] = value
    return MapSettings(**found)


# ---- designs ------------------------------------------------------------------------------------------------------


def _levels(vary: Vary) -> tuple[Any, ...]:
    return tuple(vary.factors or vary.values or vary.range or ())


def _one_at_a_time(block: Sensitivity, seed: int) -> Iterator[dict[Vary, Any]]:
    yield {}
    for vary in block.vary:
        for value in _levels(vary):
            yield {vary: value}


def _all(block: Sensitivity, seed: int) -> Iterator[dict[Vary, Any]]:
    for values in itertools.product(*(_levels(v) for v in block.vary)):
        yield dict(zip(block.vary, values, strict=True))


def _latin_hypercube(block: Sensitivity, seed: int) -> Iterator[dict[Vary, Any]]:
    from scipy.stats import qmc

    drawer = qmc.LatinHypercube(len(block.vary), seed=np.random.default_rng([seed, 21]))
    for _ in range(TRIES):
        for row in drawer.random(block.cases or 1):
            yield _placed(block, row)


def _sobol(block: Sensitivity, seed: int) -> Iterator[dict[Vary, Any]]:
    from scipy.stats import qmc

    drawer = qmc.Sobol(len(block.vary), seed=np.random.default_rng([seed, 22]))
    size = max(1, int(np.ceil(np.log2(block.cases or 1))))
    rows = drawer.random_base2(size)
    for _ in range(TRIES):
        for row in rows:
            yield _placed(block, row)
        rows = drawer.random(len(rows))


_SAMPLES: dict[str, Callable[[Sensitivity, int], Iterator[dict[Vary, Any]]]] = {
    "one_at_a_time": _one_at_a_time, "all": _all, "latin_hypercube": _latin_hypercube, "sobol": _sobol,
}  # fmt: skip


def _placed(block: Sensitivity, row: Floats) -> dict[Vary, Any]:
    """Values at a point of the unit cube: factors even in log space, ranges even, values in turn."""
    found: dict[Vary, Any] = {}
    for vary, u in zip(block.vary, row, strict=True):
        if vary.factors is not None:
            low, high = np.log(min(vary.factors)), np.log(max(vary.factors))
            found[vary] = float(f"{np.exp(low + u * (high - low)):.6g}")
        elif vary.range is not None:
            low, high = vary.range
            whole = vary.what == "member"
            found[vary] = int(low + u * (high - low + 1)) if whole else float(f"{low + u * (high - low):.6g}")
        else:
            values = vary.values or ()
            found[vary] = values[min(int(u * len(values)), len(values) - 1)]
    return found


# ---- the plan -----------------------------------------------------------------------------------------------------

SECONDS_PER_VALUE = 2e-6
"""Of making and writing one class of one layer of one cell, maps and members included: the demo's 24 cases of 86,400 such values
took 4 seconds of processor time, and 11 by the clock on a busy machine of 2 cores."""


def plan_cases(recipe: Recipe, target: Target) -> CasePlan:
    """Work out count, size and time of a recipe's sensitivity set, and check that every case's rim fits on the grid.

    Raises
    ------
    TextureError
        As `make_cases`; also a rim that covers all water.
    """
    from texture.bed.rim import rim_weight
    from texture.early import read_rim
    from texture.output import bed_outline

    cases, left_out = make_cases(recipe)
    start = read_rim(recipe, target).start
    for case in {repr(c.made_by.rim): c for c in cases}.values():
        if case.made_by.rim is not None and case.made_by.rim != recipe.rim:
            try:
                rim_weight(target, case.made_by.rim, start)
            except BedError as error:
                raise RecipeError(f"sensitivity: {case.name}: {error}") from error
    outline = bed_outline(target, recipe)
    each = sum(
        float(v.dtype.itemsize * v.size) * (target.n_cells if set(target.dims) <= set(v.dims) else 1)
        for v in outline.variables.values()
    )
    values = target.n_cells * len(recipe.bed.classes) * len(recipe.bed.layers)
    return CasePlan(cases, left_out, each, max(1.0, SECONDS_PER_VALUE * values * len(cases)))
