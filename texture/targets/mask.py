"""Which cells of a NetCDF grid are water, and how deep: variables found by their attributes or as named."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["find_depth", "find_mask", "no_mask_note"]

DEPTH_NAMES = (
    "sea_floor_depth_below_mean_sea_level",
    "sea_floor_depth_below_geoid",
    "sea_floor_depth_below_sea_surface",
)
WATER_WORDS = {"sea", "water", "wet", "ocean", "active"}
LAND_WORDS = {"land", "dry", "inactive"}


def find_mask(
    dataset: xr.Dataset, named: str | None, dims: tuple[str, ...], name: str, notes: list[str]
) -> NDArray[np.bool_] | None:
    """Return True where the cell is water, shape of the grid; None where the file has no mask.

    The meaning comes from the standard name (`sea_binary_mask`, `land_binary_mask`) or from
    `flag_values` and `flag_meanings`; a mask that was named but says nothing is read as 1 = water, and
    a note says so. Missing values are dry.
    """
    variable = _named(dataset, named, dims, name) if named is not None else _found(dataset, dims, name)
    if variable is None:
        return None
    values = variable.transpose(*dims).to_numpy().astype(np.float64)
    standard_name = variable.attrs.get("standard_name", "")
    if standard_name == "sea_binary_mask":
        return np.asarray(values == 1)
    if standard_name == "land_binary_mask":
        return np.asarray(values == 0)
    water = _flagged_water(variable)
    if water is not None:
        return np.isin(values, water)
    unknown = np.unique(values[np.isfinite(values) & ~np.isin(values, [0.0, 1.0])])
    if unknown.size:
        raise TargetError(
            f'{name}: mask "{variable.name}" holds {unknown[0]:g}, expected 0 and 1, '
            "or flag_values with flag_meanings that name water and land"
        )
    notes.append(f'mask "{variable.name}" does not say what its values mean: 1 is taken as water')
    return np.asarray(values == 1)


def no_mask_note(dataset: xr.Dataset, dims: tuple[str, ...], name: str) -> str:
    """Say that nothing tells land from water, and which variables of the grid look as if they did."""
    note = f"{name} has no mask that says what it means, and no land was given: every cell is taken as water"
    told = []
    for variable in dataset.data_vars.values():
        if set(variable.dims) != set(dims) or variable.dtype.kind not in "iuf":
            continue
        values = np.asarray(variable.to_numpy(), dtype=np.float64)
        missing = ~np.isfinite(values)
        if set(np.unique(values[~missing])) == {0.0, 1.0}:
            told.append(f'"{variable.name}" holds 0 and 1')
        elif missing.any() and not missing.all():
            told.append(f'"{variable.name}" is missing in {int(missing.sum()):,} cells')
    return note + (
        f"; {', '.join(told[:3])}: if one of them tells, name a mask of 0 and 1 as target.mask" if told else ""
    )


def find_depth(dataset: xr.Dataset, named: str | None, dims: tuple[str, ...], name: str) -> NDArray[np.float64] | None:
    """Return the water depth, positive down, shape of the grid; None where the file has none or several."""
    if named is None:
        found = [
            v
            for v, a in dataset.data_vars.items()
            if a.attrs.get("standard_name") in DEPTH_NAMES and set(a.dims) == set(dims)
        ]
        if len(found) != 1:
            return None
        named = str(found[0])
    if named not in dataset:
        raise TargetError(
            f'{name}: no variable "{named}" for the depth; it has {", ".join(map(str, dataset.data_vars))}'
        )
    if set(dataset[named].dims) != set(dims):
        raise TargetError(f'{name}: depth "{named}" is on {dataset[named].dims}, the grid on {dims}')
    return np.asarray(dataset[named].transpose(*dims).to_numpy(), dtype=np.float64)


def _named(dataset: xr.Dataset, named: str, dims: tuple[str, ...], name: str) -> xr.DataArray:
    if named not in dataset:
        raise TargetError(
            f'{name}: no variable "{named}" for the mask; it has {", ".join(map(str, dataset.data_vars))}'
        )
    variable = dataset[named]
    if set(variable.dims) != set(dims):
        raise TargetError(
            f'{name}: mask "{named}" has shape {dict(variable.sizes)}, expected the grid\'s dimensions {list(dims)}'
        )
    return variable


def _found(dataset: xr.Dataset, dims: tuple[str, ...], name: str) -> xr.DataArray | None:
    found = [
        v
        for v in dataset.data_vars.values()
        if set(v.dims) == set(dims)
        and (v.attrs.get("standard_name") in ("sea_binary_mask", "land_binary_mask") or _flagged_water(v) is not None)
    ]
    if len(found) > 1:
        raise TargetError(f"{name}: several masks ({', '.join(str(v.name) for v in found)}); choose one as target.mask")
    return found[0] if found else None


def _flagged_water(variable: xr.DataArray) -> NDArray[np.float64] | None:
    """Flag values whose meaning is water; None unless the meanings name both water and land."""
    meanings = str(variable.attrs.get("flag_meanings", "")).split()
    values = np.atleast_1d(variable.attrs.get("flag_values", []))
    if not meanings or len(meanings) != values.size:
        return None
    words = [set(re.split(r"[_\W]+", m.lower())) for m in meanings]
    if not any(w & WATER_WORDS for w in words) or not any(w & LAND_WORDS for w in words):
        return None
    return np.array([v for v, w in zip(values, words, strict=True) if w & WATER_WORDS], dtype=np.float64)
