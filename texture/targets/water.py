"""Which nodes of a lattice are water, on the target's cells and off them: by its land polygons, or by its nearest cell."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.space.lattice import Lattice
from texture.targets.land import on_land
from texture.targets.structured import Structured
from texture.targets.target import Target

if TYPE_CHECKING:
    from texture.targets.covariates import FromPlane, ToPlane

__all__ = ["knows_land", "water_on"]


def knows_land(target: Target) -> bool:
    """Tell whether the target knows of any land."""
    return target.land is not None or (
        target.topology is not None and bool(_dry(target).any() or not _has_rows(target))
    )


def _has_rows(target: Target) -> bool:
    return isinstance(target.topology, Structured)


def _dry(target: Target) -> NDArray[np.bool_]:
    """Cells that are land; a halo is neither land nor water."""
    dry = ~target.active
    return dry & ~target.topology.in_halo() if isinstance(target.topology, Structured) else dry


def water_on(lattice: Lattice, target: Target, to_plane: ToPlane, from_plane: FromPlane) -> NDArray[np.bool_]:
    """Tell which nodes of a lattice over the plane are water, shape (count,).

    Land polygons decide where the target has some; land thinner than a step, such as a breakwater, makes the nodes on one side of
    it dry, so that no way leads across. Without polygons a node is what its nearest cell is, so that both land and water go on
    beyond the grid; where cells without a position (as models often leave land) or the holes of a mesh may lie between, only a
    node within about half a cell of a water cell is water.
    """
    if target.land is not None:
        return _off_polygons(lattice, target, from_plane)
    from scipy.spatial import cKDTree

    located = np.isfinite(target.longitude) & np.isfinite(target.latitude)
    whole = _has_rows(target) and bool(located.all())
    counted = located & (target.active | _dry(target)) if whole else target.active
    cells = np.flatnonzero(counted)
    tree = cKDTree(to_plane(target.longitude[cells], target.latitude[cells]))
    distance, index = tree.query(lattice.nodes)
    nearest = cells[index]
    if whole:
        return np.asarray(target.active[nearest])
    # Half a diagonal of a square is 0.71 sides; the middle of an even triangle is 0.88 root areas from its corners.
    share = 0.75 if _has_rows(target) else 0.9
    return np.asarray(distance <= share * np.sqrt(target.area_m2[nearest]))


def _off_polygons(lattice: Lattice, target: Target, from_plane: FromPlane) -> NDArray[np.bool_]:
    import shapely

    place = np.column_stack(from_plane(lattice.nodes))
    wet = ~on_land(target.land, place[:, 0], place[:, 1])
    number = np.arange(lattice.count).reshape(lattice.shape)
    for a, b in ((number[:, :-1], number[:, 1:]), (number[:-1], number[1:])):
        both = wet[a] & wet[b]
        begin, end = a[both], b[both]
        crossed = shapely.intersects(target.land, shapely.linestrings(np.stack([place[begin], place[end]], axis=1)))
        wet[begin[crossed]] = False
    return wet
