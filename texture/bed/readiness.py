"""Is a bed ready for a model? Checks on arrays, each with a verdict and the places that fail."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from texture.bed.cells import Bools, Floats, Ints
from texture.bed.classes import COMPUTED_ABOVE_M

__all__ = ["BedArrays", "Check", "check_bed"]

Verdict = Literal["pass", "warn", "fail", "skip"]

STORED = 1e-12
"""Largest departure of a sum from 1 in double precision."""
SINGLE = 1e-6
"""The same after a trip through single precision; more than that gains or loses mass."""
JUMP = 0.9
"""Share of the bed that differs between neighbours above which a front is taken for a mistake."""


@dataclass(frozen=True)
class Check:
    """One row of the table.

    Attributes
    ----------
    name : str
    verdict : {"pass", "warn", "fail", "skip"}
        `fail`: a model will stop, or start with wrong mass. `warn`: it will run; look first. `skip`: not looked at.
    detail : str
        What was found, and where.
    """

    name: str
    verdict: Verdict
    detail: str


@dataclass(frozen=True, eq=False)
class BedArrays:
    """A bed as read from a file; None where the file does not have it.

    The cells have two dimensions (rows, columns) or one (a mesh, a list of places), written `*cells` here.

    Attributes
    ----------
    names : tuple of str
        Sediment classes.
    class_fraction : float array, shape (k, layer, *cells)
    water : bool array, shape (*cells), or None
    erodible_thickness, dry_density, porosity : float arrays, shape (layer, *cells), or None
    class_mass_content : float array, shape (k, layer, *cells), or None
    evidence : int array, shape (layer, *cells), or None
    rim_weight : float array, shape (*cells), or None
    diameter_m, settling_velocity_m_s, critical_stress_pa : float arrays, shape (k,), or None
    pairs : int array, shape (m, 2), or None
        Neighbouring cells of a mesh, by their flat numbers; rows and columns need none.
    """

    names: tuple[str, ...]
    class_fraction: Floats
    water: Bools | None = None
    erodible_thickness: Floats | None = None
    dry_density: Floats | None = None
    porosity: Floats | None = None
    class_mass_content: Floats | None = None
    evidence: NDArray[np.integer] | None = None
    rim_weight: Floats | None = None
    diameter_m: Floats | None = None
    settling_velocity_m_s: Floats | None = None
    critical_stress_pa: Floats | None = None
    pairs: Ints | None = None

    @property
    def neighbours(self) -> Ints | None:
        """Pairs of neighbouring cells by their flat numbers; None where nothing is known of them."""
        if self.wet.ndim != 2:
            return self.pairs
        index = np.arange(self.wet.size, dtype=np.int64).reshape(self.wet.shape)
        across = np.column_stack([index[:, :-1].ravel(), index[:, 1:].ravel()])
        return np.concatenate([across, np.column_stack([index[:-1].ravel(), index[1:].ravel()])])

    @property
    def wet(self) -> Bools:
        """Water cells; without a mask, the cells that have a bed at the surface."""
        if self.water is not None:
            return self.water
        return np.asarray(np.isfinite(self.class_fraction[:, 0]).any(axis=0))


def check_bed(
    bed: BedArrays,
    erosion_depth_m: float = 1.0,
    time_step_s: float | None = None,
    water_layer_m: float | None = None,
    active_layer_m: float | None = None,
) -> list[Check]:
    """Check a bed.

    Parameters
    ----------
    bed : BedArrays
    erosion_depth_m : float
        Depth that the run may cut; a thinner bed gets a warning. Storms on shallow muddy shelves have cut
        more than a metre (common practice, no source).
    time_step_s, water_layer_m : float, optional
        The model's time step and thinnest layer of water: with both, grains that fall through more than
        one layer in one step are named.
    active_layer_m : float, optional
        Thickness of the layer that the model mixes at once; a thinner first layer gets a warning, since the layer
        below, where nobody sampled, is then mixed in from the first step.

    Returns
    -------
    list of Check
    """
    if not bed.wet.any():
        return [Check("water mask", "fail", "no cell is water")]
    checks = [check for one in _CHECKS for check in one(bed)]
    checks += _thickness(bed, erosion_depth_m)
    if time_step_s is not None and water_layer_m is not None:
        checks += _fall(bed, time_step_s, water_layer_m)
    if active_layer_m is not None:
        checks += _active_layer(bed, active_layer_m)
    return checks


def _mask(bed: BedArrays) -> Iterator[Check]:
    if bed.water is None:
        yield Check("water mask", "warn", "the file has none: cells without a bed at the surface are taken as land")
    else:
        yield Check("water mask", "pass", f"{int(bed.water.sum()):,} water cells of {bed.water.size:,}")


def _holes(bed: BedArrays) -> Iterator[Check]:
    found = []
    for name in ("class_fraction", "erodible_thickness", "dry_density", "porosity", "class_mass_content"):
        values = getattr(bed, name)
        if values is not None:
            missing = ~np.isfinite(values).reshape(-1, *bed.wet.shape).all(axis=0) & bed.wet
            if missing.any():
                found.append(f"{name}: {_places(missing)}")
    yield Check("holes", "fail" if found else "pass", "; ".join(found) or "every water cell has a bed")


def _fractions(bed: BedArrays) -> Iterator[Check]:
    wet = bed.class_fraction[:, :, bed.wet]
    outside = np.any((wet < 0.0) | (wet > 1.0), axis=(0, 1))
    detail = _wet_places(bed, outside) if outside.any() else _span(wet)
    yield Check("fractions in 0 to 1", "fail" if outside.any() else "pass", detail)
    off = np.asarray(np.abs(wet.sum(axis=0) - 1.0))
    largest = float(np.nanmax(off, initial=0.0))
    if largest > SINGLE:
        yield Check("sums", "fail", f"off by up to {largest:.1e}: {_wet_places(bed, np.any(off > SINGLE, axis=0))}")
    else:
        verdict: Verdict = "pass" if largest <= STORED else "warn"
        yield Check("sums", verdict, f"1 to within {largest:.1e}" + ("" if verdict == "pass" else ", single precision"))


def _mass(bed: BedArrays) -> Iterator[Check]:
    if bed.class_mass_content is None or bed.erodible_thickness is None or bed.dry_density is None:
        return
    expected = bed.erodible_thickness * bed.dry_density * bed.class_fraction
    wet = bed.wet
    off = np.abs(bed.class_mass_content - expected)[:, :, wet] / np.maximum(expected[:, :, wet].max(axis=0), 1e-300)
    largest = float(np.nanmax(off, initial=0.0))
    detail = f"thickness × dry density × fraction to {largest:.1e}"
    if largest > SINGLE:
        yield Check("mass content", "fail", f"{detail}: {_wet_places(bed, (off > SINGLE).any(axis=(0, 1)))}")
    else:
        yield Check("mass content", "pass", detail)


def _rim(bed: BedArrays) -> Iterator[Check]:
    outer = _outer_edge(bed)
    if bed.rim_weight is None or not (bed.rim_weight > 0.0).any():
        if outer is None:
            yield Check("rim", "warn", "no rim; where the outer edge of these cells lies, the file does not say")
        else:
            verdict: Verdict = "warn" if outer.any() else "pass"
            yield Check("rim", verdict, f"no rim; {int(outer.sum())} water cells lie on the outer edge")
        return
    detail = f"{int((bed.rim_weight > 0.0).sum()):,} cells"
    bare = 0 if outer is None else int((outer & (bed.rim_weight == 0.0)).sum())
    if bare:
        detail += f"; {bare} water cells of the outer edge have none (river inlets, or sides left out)"
    yield Check("rim", "pass", detail)
    if bed.diameter_m is not None:
        fine = bed.diameter_m < COMPUTED_ABOVE_M
        edge = (bed.rim_weight == 1.0) & bed.wet
        mud = bed.class_fraction[fine].sum(axis=0)[:, edge].max(initial=0.0)
        verdict = "pass" if mud == 0.0 else "warn"
        yield Check("rim is coarse", verdict, f"at most {100 * mud:.3g} % finer than 63 µm at the open edge")


def _outer_edge(bed: BedArrays) -> Bools | None:
    """Water cells of the first and last rows and columns; None for meshes and places."""
    if bed.wet.ndim != 2:
        return None
    outer = np.zeros(bed.wet.shape, dtype=bool)
    outer[[0, -1]] = outer[:, [0, -1]] = True
    return outer & bed.wet


def _land(bed: BedArrays) -> Iterator[Check]:
    if bed.water is None or bed.water.all():
        return
    empty = ~np.isfinite(bed.class_fraction).all(axis=(0, 1)) & ~bed.wet
    if empty.any():
        yield Check("land", "warn", f"{int(empty.sum()):,} land cells have no bed; a model that wets one finds none")
        return
    detail = "filled"
    if bed.erodible_thickness is not None:
        thick = (bed.erodible_thickness[:, ~bed.wet] > 0.0).any(axis=0).sum()
        detail += f"; {int(thick):,} land cells can erode" if thick else ", with no erodible thickness"
    yield Check("land", "pass", detail)


def _neighbours(bed: BedArrays) -> Iterator[Check]:
    pairs = bed.neighbours
    if pairs is None:
        return
    wet = bed.wet.ravel()
    a, b = pairs[wet[pairs].all(axis=1)].T
    beside = np.zeros(wet.size, dtype=bool)
    beside[a] = beside[b] = True
    alone = (wet & ~beside).reshape(bed.wet.shape)
    yield Check("isolated water", "warn" if alone.any() else "pass", _places(alone) if alone.any() else "none")
    surface = bed.class_fraction[:, 0].reshape(len(bed.class_fraction), -1)
    jump = np.zeros(wet.size)
    step = np.abs(surface[:, a] - surface[:, b]).sum(axis=0) / 2.0
    np.maximum.at(jump, b, np.nan_to_num(step))
    sharp = (jump > JUMP).reshape(bed.wet.shape)
    detail = f"largest {100 * jump.max(initial=0.0):.0f} % of the bed between neighbours"
    yield Check("jumps", "warn" if sharp.any() else "pass", f"{detail}: {_places(sharp)}" if sharp.any() else detail)


def _properties(bed: BedArrays) -> Iterator[Check]:
    ranges = {
        "diameter_m": ("grain diameter", 1e-7, 0.3, "m"),
        "settling_velocity_m_s": ("settling velocity", 1e-7, 3.0, "m s-1"),
        "critical_stress_pa": ("critical stress", 0.01, 300.0, "Pa"),
    }
    for attribute, (name, low, high, unit) in ranges.items():
        values = getattr(bed, attribute)
        if values is None:
            continue
        missing = [n for n, v in zip(bed.names, values, strict=True) if np.isnan(v)]
        odd = [f"{n} {v:g}" for n, v in zip(bed.names, values, strict=True) if v < low or v > high]
        if odd:
            yield Check(name, "fail", f"outside {low:g} to {high:g} {unit}: {', '.join(odd)}")
        elif missing:
            yield Check(name, "warn", f"not given for {', '.join(missing)}: the model must be told")
        else:
            yield Check(name, "pass", f"{_span(values)} {unit}")
    for attribute, name, low, high, unit in (
        ("porosity", "porosity", 0.1, 0.95, ""),
        ("dry_density", "dry density", 50.0, 2500.0, "kg m-3"),
    ):
        values = getattr(bed, attribute)
        if values is not None:
            wet = values[:, bed.wet]
            odd_cells = ((wet < low) | (wet > high)).any(axis=0)
            detail = f"{_span(wet)} {unit}".rstrip()
            if odd_cells.any():
                detail += f", expected {low:g} to {high:g}: {_wet_places(bed, odd_cells)}"
            yield Check(name, "fail" if odd_cells.any() else "pass", detail)


def _support(bed: BedArrays) -> Iterator[Check]:
    if bed.evidence is None:
        return
    surface = bed.evidence[0][bed.wet]
    beyond = float(np.isin(surface, (2, 6)).mean())
    detail = f"{100 * beyond:.1f} % of the water cells, the rim not counted, lie beyond what the samples support"
    yield Check("support", "warn" if beyond > 0.5 else "pass", detail)


_CHECKS: tuple[Callable[[BedArrays], Iterator[Check]], ...] = (
    _mask, _holes, _fractions, _mass, _rim, _land, _neighbours, _properties, _support,
)  # fmt: skip


def _thickness(bed: BedArrays, erosion_depth_m: float) -> list[Check]:
    if bed.erodible_thickness is None:
        return [Check("thickness", "warn", "the file does not say how thick the bed is")]
    wet = bed.erodible_thickness[:, bed.wet]
    negative = np.any(wet < 0.0, axis=0)
    if negative.any():
        return [Check("thickness", "fail", f"below 0: {_wet_places(bed, negative)}")]
    total = wet.sum(axis=0)
    thin = total < erosion_depth_m
    detail = f"{_span(total)} m in {wet.shape[0]} layers"
    if thin.any():
        detail += f"; less than the {erosion_depth_m:g} m that a run may cut: {_wet_places(bed, thin)}"
    return [Check("thickness", "warn" if thin.any() else "pass", detail)]


def _fall(bed: BedArrays, time_step_s: float, water_layer_m: float) -> list[Check]:
    if bed.settling_velocity_m_s is None:
        return [Check("fall in a time step", "warn", "the file has no settling velocities")]
    fall = bed.settling_velocity_m_s * time_step_s
    far = [f"{n} {f:.3g} m" for n, f in zip(bed.names, fall, strict=True) if f > water_layer_m]
    if far:
        return [Check("fall in a time step", "warn", f"more than the {water_layer_m:g} m of water: {', '.join(far)}")]
    return [
        Check("fall in a time step", "pass", f"at most {np.nanmax(fall, initial=0.0):.3g} m of {water_layer_m:g} m")
    ]


def _active_layer(bed: BedArrays, active_layer_m: float) -> list[Check]:
    if bed.erodible_thickness is None:
        return [Check("first layer", "warn", "the file does not say how thick the bed is")]
    first = bed.erodible_thickness[0][bed.wet]
    thin = first < active_layer_m
    detail = f"{_span(first)} m, active layer {active_layer_m:g} m"
    if thin.any():
        detail += f"; thinner, so that what lies below is mixed in from the first step: {_wet_places(bed, thin)}"
    return [Check("first layer", "warn" if thin.any() else "pass", detail)]


def _span(values: Floats) -> str:
    known = values[np.isfinite(values)]
    return f"{known.min():.3g} to {known.max():.3g}" if known.size else "no value"


def _wet_places(bed: BedArrays, which: Bools) -> str:
    """Places of some of the water cells, which are numbered in row-major order."""
    where = np.zeros(bed.wet.shape, dtype=bool)
    where[bed.wet] = which
    return _places(where)


def _places(where: Bools) -> str:
    """How many cells, and the first three by row and column, or by number, from 0."""
    found = np.nonzero(where)
    if where.ndim == 1:
        first = ", ".join(str(i) for i in found[0][:3].tolist())
    else:
        first = ", ".join(f"({', '.join(map(str, place))})" for place in np.column_stack(found)[:3].tolist())
    word = "number" if where.ndim == 1 else "(row, column)"
    more = ", …" if found[0].size > 3 else ""
    return f"{found[0].size:,} cells, {word} {first}{more}"
