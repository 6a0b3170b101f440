"""Members on the target: equally likely maps, made in one pass over the cells and kept on disk."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]  # ships no annotations

from texture.errors import RecipeError
from texture.estimate import mean_in_cells
from texture.member_fractions import member_fractions
from texture.predict import Kriging
from texture.predict.circulant import CirculantPrior, find_lattice, pairs_of
from texture.predict.members import Members
from texture.progress import Progress, Silent
from texture.scratch import Scratch
from texture.structure.averaging import averaged_out
from texture.targets import Target, cell_points

if TYPE_CHECKING:
    from texture.mapping import Mapper
    from texture.space import Seen
    from texture.structure.plane import Plane

__all__ = ["MemberMaps", "check_members", "draw_members"]

Floats = NDArray[np.float64]
MOST_CELLS = 20_000
NUMBERS_AT_ONCE = 2_000_000
"""Of kriged values held at once, 16 MB: bounds the memory whatever the number of members."""


@dataclass(frozen=True, eq=False)
class MemberMaps:
    """Fractions of the members in the target's water cells, on disk.

    Attributes
    ----------
    numbers : tuple of int
        Which members, counted from 1.
    cells : int array, shape (m,)
        Water cells, by their flat number.
    method : str
        How the prior fields were made.
    """

    numbers: tuple[int, ...]
    cells: NDArray[np.int64]
    n_cells: int
    method: str
    _store: Scratch

    def fractions(self, number: int) -> Floats:
        """Fractions of one member over all cells of the target, shape (n, parts), NaN outside the water."""
        found = np.full((self.n_cells, self._store.width), np.nan)
        found[self.cells] = self._store.read(self.numbers.index(number))
        return found

    def blocks(self) -> Iterator[tuple[NDArray[np.int64], Floats]]:
        """Cells, and all members' fractions in them, shape (members, m, parts), a block at a time."""
        at_once = max(256, NUMBERS_AT_ONCE // (len(self.numbers) * self._store.width))
        for first in range(0, self.cells.size, at_once):
            last = min(first + at_once, self.cells.size)
            yield self.cells[first:last], self._store.read_all(first, last)


def check_members(mapper: Mapper) -> Kriging:
    """Return the kriging that members are drawn from; raises `RecipeError` where the method is another."""
    if not isinstance(mapper.predictor, Kriging):
        raise RecipeError(
            f'ensemble.members: method "{mapper.name}" has no kriging variance to draw from; use method.name = "kriging"'
        )
    return mapper.predictor


def draw_members(
    target: Target,
    mapper: Mapper,
    plane: Plane,
    per_side: int,
    numbers: Sequence[int],
    seed: int,
    folder: Path,
    stack: ExitStack,
    progress: Progress | None = None,
    median: bool = False,
    apart_m: float = 0.0,
) -> MemberMaps:
    """Draw members on every water cell.

    Parameters
    ----------
    target, mapper, plane, per_side, median
        As for the estimate.
    numbers : sequence of int
        Which members, from 1. A member is the same whichever others are drawn with it.
    seed : int
    folder : path
        For scratch files: 8 bytes for each member, part and cell, and for rasters in the plane as many again for each
        column and point.
    stack : ExitStack
        Closes the scratch files.
    progress : Progress, optional
    apart_m : float
        Sampling distance: what of the small-scale variation averages out inside a cell follows from it.
    """
    kriging, progress = check_members(mapper), progress or Silent()
    stack.enter_context(threadpool_limits(limits=1, user_api="blas"))  # a library's sums hang on its threads
    cells = np.flatnonzero(target.active)
    stations = kriging.stations.points

    inside = cell_points(target, cells[:1], per_side, plane.to_metres).shape[1]

    def seen_in(some: NDArray[np.int64]) -> Seen:
        places = cell_points(target, some, per_side, plane.to_metres)
        return mapper.space.at(places.reshape(-1, places.shape[-1]))

    prior, priors, at = None, None, None
    every = seen_in(cells).points
    lattice = find_lattice(every, stations) if mapper.space.flat else None
    circulant = None if lattice is None else CirculantPrior.make(mapper.structure, lattice, stations, seed)
    if circulant is not None:
        assert lattice is not None
        at = lattice.nodes_of(every)
        width = len(mapper.structure)
        priors = stack.enter_context(Scratch(folder / "priors.bin", len(numbers), len(every), width))
        prior = np.empty((len(stations), width, len(numbers)))
        with progress.stage("prior fields", total=len(numbers)) as advance:
            for pair in pairs_of(numbers):
                fields = circulant.pair(pair)
                for half, number in enumerate((2 * pair + 1, 2 * pair + 2)):
                    if number in numbers:
                        j = list(numbers).index(number)
                        prior[:, :, j] = circulant.at_stations(fields[half], number)
                        priors.write(j, 0, fields[half].reshape(width, -1)[:, at].T)
                        advance(1)
    del every, at
    side = np.sqrt(np.nan_to_num(target.area_m2[cells]))
    averaging = averaged_out(side, apart_m)
    members = Members(kriging, numbers, seed, prior)
    parts = mapper.logratio.n_parts
    store = stack.enter_context(Scratch(folder / "fractions.bin", len(numbers), cells.size, parts))
    at_once = max(64, min(MOST_CELLS, NUMBERS_AT_ONCE // (inside * len(mapper.structure) * len(numbers))))
    with progress.stage("members", total=cells.size) as advance:
        for first in range(0, cells.size, at_once):
            some = cells[first : first + at_once]
            seen = seen_in(some)
            here = None
            if priors is not None:
                here = np.moveaxis(priors.read_all(first * inside, (first + some.size) * inside), 0, 2)
            fields, mean, variance = members.predict_with_moments(
                seen.points, here, small_scale=False, drift=seen.drift
            )
            # Of the small-scale variation a cell has some in common, and the rest averages out inside it.
            away = np.where(members.at_station(seen.points) >= 0, 0.0, 1.0)[:, None]
            gone = np.repeat(averaging[first : first + some.size], inside)[:, None]
            middle = seen.points.reshape(some.size, inside, -1).mean(axis=1)
            common = np.repeat(members.patchiness(middle), inside, axis=0)
            fields += common * (away * np.sqrt(1.0 - gone))[:, :, None]
            within = away * gone * mapper.small_scale
            for j in range(len(numbers)):
                own = np.ascontiguousarray(fields[:, :, j])
                share = member_fractions(mapper, own, mean, variance, within, median)
                store.write(j, first, mean_in_cells(share, (some.size, inside)))
            advance(some.size)
    method = "circulant embedding" if circulant is not None else "spectral method"
    return MemberMaps(tuple(numbers), cells, target.n_cells, method, store)
