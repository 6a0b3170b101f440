"""What a run found, in words and numbers: for a notebook, the terminal, the page and `--json`."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.early import RimInputs
from texture.space import own_ranges, space_line, space_record
from texture.validation_lines import validation_lines, validation_record

if TYPE_CHECKING:
    from texture.bed import Bed, CoreLayer, Moved, Stock
    from texture.clock import Clock
    from texture.estimate import Estimate
    from texture.mapping import Mapper
    from texture.member_summary import MemberSummary
    from texture.observations import Observations
    from texture.quantities import QuantityMap, QuantityModel
    from texture.recipe import Recipe
    from texture.second_look import SecondLook
    from texture.space import Space
    from texture.stations import Stations
    from texture.structure.plane import Plane
    from texture.targets import Target
    from texture.validate import Validation

__all__ = ["Intake", "Result", "Validated"]

Floats = NDArray[np.float64]
MOST_LINES = 12
MOST_CONDITIONS = 2  # of the mobility screen in a summary that fits a dozen lines


@dataclass(frozen=True, eq=False)
class Intake:
    """Stations, and what became of every row."""

    recipe: Recipe
    stations: Stations
    files: tuple[Path, ...] = ()

    def summary(self) -> dict[str, Any]:
        """Counts of rows by their fate, and the files written."""
        return {**self.stations.counts, "files": [p.name for p in self.files]}

    def summary_lines(self) -> list[str]:
        """Lines for a person."""
        notes = [f"  {'note' if i == 0 else '':<11} {note}" for i, note in enumerate(self.stations.notes)]
        reasons = Counter(self.stations.set_aside["reason"]).most_common(5)
        aside = [f"  {'set aside' if i == 0 else '':<11} {n} × {reason}" for i, (reason, n) in enumerate(reasons)]
        return [
            self.recipe.title,
            *rows_lines(self.stations),
            *aside,
            *notes,
            *written_line(self.recipe, self.files),
        ]

    def __repr__(self) -> str:
        return "\n".join(self.summary_lines())


@dataclass(frozen=True, eq=False)
class Validated:
    """Everything up to the held-out error: the map's method is fitted, the map not yet made."""

    recipe: Recipe
    stations: Stations
    target: Target
    plane: Plane
    observations: Observations
    mapper: Mapper
    validation: Validation
    quantities: tuple[QuantityModel, ...] = ()
    spaces: Mapping[str, Space] = field(default_factory=dict)
    files: tuple[Path, ...] = ()

    @property
    def range_m(self) -> float:
        """Shortest fitted range among the coordinates, 0 where there is no spatial structure."""
        return min((c.range_m for c in self.mapper.structure), default=0.0)

    @cached_property
    def cell_side_m(self) -> float:
        """Side of a square of the median water cell's area."""
        return float(np.sqrt(np.median(self.target.area_m2[self.target.active])))

    @property
    def heard(self) -> list[NDArray[np.bool_]] | None:
        """Which observations speak in zone 0 (none), 1, 2, …; None without zones."""
        zones = self.mapper.zones
        return (
            None if zones is None else [zones.heard(i, self.observations.rows) for i in range(len(zones.settings) + 1)]
        )

    def some_centres(self, count: int) -> Floats:
        """Centres of a seeded choice of water cells in no zone, in the plane, shape (cells, 2); all where there are no more."""
        zones = self.mapper.zones
        wet = np.flatnonzero(self.target.active if zones is None else self.target.active & (zones.cells.zone == 0))
        if wet.size > count:
            wet = np.sort(np.random.default_rng(self.recipe.seed).choice(wet, count, replace=False))
        return self.plane.to_metres(self.target.longitude[wet], self.target.latitude[wet])

    @property
    def reach_m(self) -> float:
        """Distance from the samples up to which the map has been tested."""
        return self.validation.support.reach_m

    def scores(self) -> dict[str, dict[str, dict[str, float | None]]]:
        """Method → part → score → value, None where a score could not be made."""
        table: dict[str, dict[str, dict[str, float | None]]] = {}
        for method in self.validation.methods:
            parts = table.setdefault(method.method, {})
            for row in method.scores:
                parts.setdefault(row.part, {})[row.score] = known(row.value)
        for quantity in self.quantities:
            for found in quantity.methods:
                own = {score: known(value) for score, value in found.scores.items()}
                table.setdefault(found.method, {})[quantity.settings.name] = own
        return table

    def summary(self) -> dict[str, Any]:
        """Counts, scores and files."""
        return {**self.stations.counts, "folds": self.validation.folds.count, "zeros": self.mapper.treatment.label,
                "space": space_record(self.mapper.space), "scores": self.scores(),
                "validation": validation_record(self),
                "files": [p.name for p in self.files]}  # fmt: skip

    def summary_lines(self) -> list[str]:
        """Lines for a person."""
        lines = [self.recipe.title, *rows_lines(self.stations), f"  folds       {self.validation.folds!r}"]
        return [
            *lines,
            *zeros_lines(self),
            *distance_lines(self),
            *validation_lines(self),
            *quantity_lines(self),
            *written_line(self.recipe, self.files),
        ]

    def __repr__(self) -> str:
        return "\n".join(self.summary_lines())


@dataclass(frozen=True, eq=False)
class Result:
    """A finished build.

    Attributes
    ----------
    found : Validated
        Recipe, stations, target, fitted method and validation.
    estimate : Estimate
        The map, flat over the target's cells.
    points_per_side : int
        Points along each side of a cell that its value was averaged over.
    look : SecondLook or None
        What came of solving some cells again.
    bed : Bed
    clock : Clock
    files : tuple of Path
        What was written.
    moved : tuple of Moved
        The mobility screen, one for each condition of the recipe.
    inventory : tuple of Stock
        Tonnes by depth band and class, with their range.
    quantities : tuple of QuantityMap
        Maps of the recipe's further numbers.
    members : MemberSummary or None
        What the members of the recipe's ensemble say together.
    cores : mapping of layer from 0 to CoreLayer
        Layers of the bed that are filled from cores.
    rim : RimInputs
        Where the rim is, and what files say of it.
    further : mapping of name to Result
        The same fit on the recipe's further targets.
    """

    found: Validated
    estimate: Estimate
    points_per_side: int
    look: SecondLook | None
    bed: Bed
    clock: Clock
    files: tuple[Path, ...] = field(default=())
    moved: tuple[Moved, ...] = ()
    inventory: tuple[Stock, ...] = ()
    quantities: tuple[QuantityMap, ...] = ()
    members: MemberSummary | None = None
    cores: Mapping[int, CoreLayer] = field(default_factory=dict)
    rim: RimInputs = field(default_factory=RimInputs)
    further: Mapping[str, Result] = field(default_factory=dict)

    @property
    def beyond_share(self) -> float:
        """Share of the water area beyond what the samples support."""
        wet = self.found.target.active
        area = self.found.target.area_m2[wet]
        return float(area[self.estimate.evidence[wet] != 1].sum() / area.sum())

    def plot(self, part: str = "mud", ax: Any = None) -> Any:
        """Draw the map of one part with the stations as rings, on matplotlib axes that are made where none are given.

        Parameters
        ----------
        part : str
            One of the recipe's parts.
        ax : matplotlib Axes, optional

        Returns
        -------
        matplotlib Axes

        Raises
        ------
        ValueError
            If there is no such part.
        """
        parts, target = self.found.recipe.composition.parts, self.found.target
        if part not in parts:
            raise ValueError(f'the map has no part "{part}"; expected one of {list(parts)}')
        ax = target.plot(self.estimate.fractions[:, parts.index(part)], ax, f"{part}, expected fraction of dry mass")
        if self.found.recipe.report.stations == "shown":
            table = self.found.stations.samples
            ax.plot(table["longitude"], table["latitude"], "o", ms=3, mfc="none", mec="white", mew=0.7)
        return ax

    def answer(self) -> str:
        """Say the one-line result: stations, error against the controls, support, bed below any sample."""
        found = self.found
        controls = {m.method: m for m in found.validation.methods[1:] if m.method in ("nearest", "inverse_distance")}
        errors = []
        for part in found.recipe.composition.parts:
            rmse = found.validation.chosen.score(part, "rmse")
            beside = ", ".join(f"{name.replace('_', ' ')} {m.score(part, 'rmse'):.3f}" for name, m in controls.items())
            errors.append(f"{part} {rmse:.3f}" + (f" ({beside})" if beside else ""))
        return (
            f"{found.observations.count} stations; held-out RMSE {', '.join(errors)}; "
            f"{100 * self.beyond_share:.1f} % of the map lies beyond what the samples support; "
            f"{100 * self.bed.account.share_below_samples:.0f} % of the bed's mass lies below any sample."
            + (f" Look: {found.mapper.space.fell_back}." if found.mapper.space.fell_back else "")
        )

    def summary(self) -> dict[str, Any]:
        """Counts, scores, seconds and files: the object of `--json`."""
        account, settings = self.bed.account, self.found.recipe.bed
        return {
            **self.found.stations.counts,
            "cells": int(self.found.target.active.sum()),
            "zeros": self.found.mapper.treatment.label,
            "space": space_record(self.found.mapper.space),
            "zeros_error": self.found.validation.choice.chosen.error,
            "zeros_error_without_own_fold": self.found.validation.choice.blind_error,
            "scores": self.found.scores(),
            "validation": validation_record(self.found),
            "share_beyond_samples": self.beyond_share,
            "share_of_mass_below_samples": account.share_below_samples,
            "core_layers": [
                {
                    "layer": i + 1,
                    "cores": c.cores,
                    "covered": c.covered,
                    "share_of_area": c.share_sampled(self.found.target.active, self.found.target.area_m2),
                }
                for i, c in self.cores.items()
            ],
            "tonnes": account.tonnes,
            "rim_tonnes": account.rim_tonnes,
            "least_fraction_tonnes": account.least_fraction_tonnes,
            "not_given": list(account.not_given),
            "packing": settings.packing,
            "hiding": settings.hiding,
            "zones": []
            if self.found.mapper.zones is None
            else self.found.mapper.zones.lines(self.found.observations.rows),
            "inventory": [{k: known(v) for k, v in vars(stock).items()} for stock in self.inventory],
            "mobility": [mobility_record(m) for m in self.moved],
            "further_targets": {name: self.further_record(name) for name in self.further},
            "members": 0 if self.members is None else self.members.count,
            **(self.look.to_dict() if self.look is not None else {"second_opinion": None, "neighbourhood": None}),
            "answer": self.answer(),
            "seconds": {name: round(value, 3) for name, value in self.clock.seconds.items()},
            "files": [p.name for p in self.files],
        }

    def further_record(self, name: str) -> dict[str, Any]:
        """Numbers of one further target."""
        there, root = self.further[name], self.found.recipe.output
        inside = [p.relative_to(root) for p in self.files if p.is_relative_to(root / name)]
        return {
            "cells": int(there.found.target.active.sum()),
            "share_beyond_samples": there.beyond_share,
            "tonnes": there.bed.account.tonnes,
            "rim_cells": there.bed.account.rim_cells,
            "files": [p.as_posix() for p in inside],
        }

    def further_lines(self) -> list[str]:
        """Say what each further target got."""
        return [
            f"{name}: {there.found.target.size_text}, {int(there.found.target.active.sum()):,} of them water; "
            f"{sum(there.bed.account.tonnes.values()) / 1e6:,.3g} Mt dry; {100 * there.beyond_share:.1f} % beyond what the samples support"
            + (f"; a rim of {there.bed.account.rim_cells:,} cells" if there.bed.account.rim_cells else "; no rim")
            for name, there in self.further.items()
        ]

    def summary_lines(self) -> list[str]:
        """Lines for a person, at most a dozen."""
        found, account = self.found, self.bed.account
        total = sum(account.tonnes.values())
        mud = [n for n, c in zip(self.bed.classes.names, self.bed.classes.part, strict=True) if c == 0]
        rim = sum(-account.rim_tonnes[n] for n in mud)
        layers = len(self.bed.erodible_thickness)
        bed = f"  bed         {total / 1e6:,.1f} Mt dry in {len(account.tonnes)} classes and {layers} layer{'s' * (layers != 1)}"
        bed += f"; hiding and exposure: {found.recipe.bed.hiding}"
        for i, core in self.cores.items():
            bed += f"; layer {i + 1} from {core.line()}"
        if account.rim_cells:
            bed += f"; the rim ({account.rim_cells:,} cells) took out {rim / 1e6:,.2f} Mt of mud"
        lines = [
            found.recipe.title,
            *rows_lines(found.stations),
            *zeros_lines(found),
            *distance_lines(found)[:1],
            structure_line(found),
            *quantity_lines(found)[:1],
        ]
        lines.append(
            f"  support     {100 * self.beyond_share:.1f} % of the water area {found.validation.support.beyond_text}"
        )
        lines += radius_lines(self)
        if account.hard_cells:
            lines.append(
                f"  hard ground {account.hard_cells:,} cells cannot erode: hard with a probability of {found.recipe.bed.hard_ground_threshold:g} or more"
            )
        zones = found.mapper.zones
        for i, line in enumerate(zones.lines(found.observations.rows) if zones is not None else []):
            lines.append(f"  {'zones' if i == 0 else '':<11} {line}")
        lines.append(bed)
        lines += mobility_lines(self.moved)[:MOST_CONDITIONS]
        if len(self.moved) > MOST_CONDITIONS:
            lines[-1] += f" (and {len(self.moved) - MOST_CONDITIONS} more, on the page)"
        lines += [] if self.members is None else [self.members.line()]
        lines += [f"  {'further' if i == 0 else '':<11} {line}" for i, line in enumerate(self.further_lines())]
        if account.not_given:
            lines.append(f"  not given   {', '.join(account.not_given)}")
        lines += [*written_line(found.recipe, self.files), self.answer()]
        for least in ("structure", "zeros"):  # what the page says best goes first
            if len(lines) > MOST_LINES:
                lines = [line for line in lines if not line.startswith(f"  {least}")]
        return lines

    def __repr__(self) -> str:
        return "\n".join(self.summary_lines())


def known(value: Any) -> Any:
    """Return a value as JSON can have it: None for a number that is not known."""
    return None if isinstance(value, float) and not np.isfinite(value) else value


def mobility_record(moved: Moved) -> dict[str, Any]:
    """Numbers of one condition of the mobility screen; None where something is not known."""

    return {
        "condition": moved.name,
        "fair_weather": moved.fair_weather,
        "median_stress_pa": known(moved.median_pa),
        "largest_stress_pa": moved.largest_pa,
        "share_without_a_value": moved.unknown_share,
        "moving_share": {name: known(value) for name, value in moved.moving_share.items()},
        "moving_hours": {name: known(value) for name, value in moved.moving_hours.items()},
        "flushed_mud_share": known(moved.flushed_share),
        "rim_moving_share": known(moved.rim_share),
    }


def mobility_lines(moved: tuple[Moved, ...]) -> list[str]:
    """Say what each condition would move, and what of that a modeller should know before the first run."""
    lines: list[str] = []
    for m in moved:
        shares = ", ".join(
            f"{name} {'not known' if np.isnan(share) else f'{100 * share:.0f} %'}"
            for name, share in m.moving_share.items()
        )
        line = f"  {'mobility' if not lines else '':<11} {m.name}: median stress {m.median_pa:.2f} Pa; moves, of the water area: {shares}"
        if m.unknown_share:
            line += f"; {100 * m.unknown_share:.1f} % has no value"
        if m.flushed_share > 0.0:
            line += f"; mud far beyond its strength on {100 * m.flushed_share:.1f} %: a model will flush it at once"
        elif m.fair_weather and np.isnan(m.flushed_share):
            line += "; the mud's critical stress is not given, so whether it stays cannot be told"
        if not m.fair_weather and m.rim_share > 0.0:
            line += f"; the rim itself erodes on {100 * m.rim_share:.0f} % of its edge"
        lines.append(line)
    return lines


def rows_lines(stations: Stations) -> list[str]:
    """Say what became of the rows."""
    c = stations.counts
    return [
        f"  rows        {c['rows_read']} read: {c['rows_used']} used, {c['rows_merged']} merged, {c['rows_evidence']} hard ground, "
        f"{c['rows_set_aside']} set aside, {c['rows_not_samples']} not samples → {c['stations']} stations"
    ]


def structure_line(found: Validated) -> str:
    """Say model and ranges of each coordinate; sills stand on the page."""
    said: list[str] = []
    for name, covariance in zip(found.mapper.column_names, found.mapper.structure, strict=True):
        model = " + ".join(s.model + (f" {s.smoothness:g}" if s.smoothness else "") for s in covariance.structures)
        own = "".join(f", of {n} {r:.2g} sd" for n, r in own_ranges(found.mapper.space, covariance).items())
        if covariance.anisotropy is not None:
            own = " along azimuth {:.0f}°, {:.2g} times that across it".format(*covariance.anisotropy) + own
        said.append(
            f"{name}: "
            + (f"{model}, range {covariance.range_m / 1000:.1f} km{own}" if model else "no spatial structure")
        )
    return f"  structure   {'; '.join(said)}"


def radius_lines(result: Result) -> list[str]:
    """Say how many cells a radius of the user's leaves without a map."""
    method, outside = result.found.recipe.method, int(result.estimate.outside.sum())
    if method.radius_m is None:
        return []
    return [
        f"  radius      {outside:,} cells have fewer than {method.at_least} stations within {method.radius_m / 1000:g} km: empty in "
        "texture.nc, from the nearest stations in bed.nc"
    ]


def distance_lines(found: Validated) -> list[str]:
    """Say what distance means where it is not plain, and every note of the spaces that methods work in."""
    space = found.mapper.space
    told = [space_line(space)] if space_line(space) != "in the plane" else []
    told += dict.fromkeys(note for s in (space, *found.spaces.values()) for note in s.notes)
    return [f"  {'distance' if i == 0 else '':<11} {text}" for i, text in enumerate(told)]


def zeros_lines(found: Validated) -> list[str]:
    """Say what is done with zeros, and whether held-out error chose it."""
    tried = found.validation.tried
    line = f"  zeros       {found.mapper.treatment.label}"
    return [line + (f", of {len(tried)} treatments by held-out error" if len(tried) > 1 else "")]


def quantity_lines(found: Validated) -> list[str]:
    """Say the held-out error of each further number, beside the methods it is compared with."""
    lines: list[str] = []
    for quantity in found.quantities:
        own, *others = quantity.methods
        beside = ", ".join(f"{m.method.replace('_', ' ')} {m.scores.get('rmse', np.nan):.3g}" for m in others)
        head = "quantities" if not lines else ""
        lines.append(
            f"  {head:<11} {quantity.settings.name}: {int(own.scores['n'])} stations, mapped by {own.method.replace('_', ' ')}, held-out RMSE {own.scores.get('rmse', np.nan):.3g} "
            f"{quantity.settings.units}" + (f" ({beside})" if beside else "")
        )
    return lines


def written_line(recipe: Recipe, files: tuple[Path, ...]) -> list[str]:
    """Name the files that were written."""
    if not files:
        return []
    names: dict[str, int] = {}
    for path in files:
        relative = path.relative_to(recipe.output)
        key = relative.name if len(relative.parts) == 1 else f"{relative.parts[0]}/"
        names[key] = names.get(key, 0) + 1
    listed = ", ".join(name + (f" ({count} files)" if count > 1 else "") for name, count in names.items())
    return [f"  wrote       {recipe.output.name}/: {listed}"]
