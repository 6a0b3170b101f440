"""Put a result on disk: every file of the output folder, written aside and moved into place whole."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from texture.ensemble import write_ensemble
from texture.result import Intake, Result, Validated
from texture.space import PLANE, space_record
from texture.writing_bed import write_bed

if TYPE_CHECKING:
    import pandas as pd

    from texture.members import MemberMaps
    from texture.output import ResultFolder

__all__ = ["write_all", "write_intake", "write_validation"]


def write_intake(result: Intake, folder: ResultFolder) -> Intake:
    """Write stations and audit; return the result with its files."""
    from texture.stations import write_tables

    with folder.filling() as aside:
        write_tables(result.stations, aside)
    return replace(result, files=folder.files)


def write_validation(result: Validated, folder: ResultFolder) -> Validated:
    """Write the scores and every held-out prediction; return the result with its files."""
    from texture.report import write_error_figures

    with folder.filling() as aside:
        _write_scores(result, aside)
        if result.recipe.outputs.figures:
            write_error_figures(result, aside / "figures")
    return replace(result, files=folder.files)


def write_all(result: Result, folder: ResultFolder, recipe_path: Path, maps: MemberMaps | None = None) -> Result:
    """Write everything a build makes; return the result with its files."""
    from texture.output import provenance, write_json
    from texture.recipe.file import resolved_toml
    from texture.recipe.paths import named_files
    from texture.report import result_picture, versions_line, write_figures, write_page
    from texture.stations import write_tables
    from texture.validation_lines import validation_record

    found, recipe = result.found, result.found.recipe
    base = recipe_path.absolute().parent
    settings = resolved_toml(recipe, base)
    with folder.filling() as aside:
        write_tables(found.stations, aside)
        _write_scores(found, aside)
        _write_grids(result, aside)
        for name, there in result.further.items():
            (aside / name).mkdir()
            _write_grids(there, aside / name)
        _write_inventory(result, aside)
        if maps is not None:
            write_ensemble(result, maps, aside)
        (aside / "recipe_resolved.toml").write_text(settings, encoding="utf-8")
        picture = result_picture(result)
        (aside / "map.png").write_bytes(picture.content)
        page = write_page(result, picture, resolved_toml(recipe, base, outside="name"), versions_line(result))
        (aside / "report.html").write_text(page, encoding="utf-8")
        if recipe.outputs.figures:
            write_figures(result, aside / "figures")
        made = sorted(p for p in aside.rglob("*") if p.is_file())
        record = provenance(
            [recipe_path.absolute(), *named_files(recipe)],
            base,
            counts=found.stations.counts,
            seconds=result.clock.seconds,
            files=made,
            seed=recipe.seed,
            structure=found.mapper.structure.to_dict(),
            validation=validation_record(found),
            **(
                {"quantities": {q.settings.name: q.mapper.structure.to_dict() for q in found.quantities}}
                if found.quantities
                else {}
            ),
            space={name: space_record(space) for name, space in found.spaces.items() if space != PLANE},
            **(result.look.to_dict() if result.look is not None else {}),
        )
        write_json(aside / "provenance.json", record)
    return replace(result, files=folder.files)


def _write_grids(result: Result, aside: Path) -> None:
    from texture.composition import find_scheme
    from texture.output import (
        BED_VARIABLES,
        class_colours,
        on_cells,
        pixel_grid,
        quantity_geotiffs,
        texture_dataset,
        with_quantities,
        write_geotiff,
        write_geotiffs,
        write_netcdf,
    )

    found, recipe = result.found, result.found.recipe
    scheme = find_scheme("folk")
    words = dict(zip(scheme.numbers, scheme.words, strict=True))
    support = (
        f"mean over {result.points_per_side**2} points inside each cell"
        if result.points_per_side > 1
        else "value at the cell centre, which stands for the small cell"
    )
    attributes = {
        "coordinates_partition": repr(found.mapper.logratio),
        "zeros": found.mapper.treatment.label,
        "fraction_support": support,
        "quantile_support": "cell mean: small-scale variation averages out inside the cell as far as a range of the median "
        "distance between neighbouring stations lets it",
    }
    names = found.mapper.column_names
    quantities = [(q.model.settings, q) for q in result.quantities]
    texture = texture_dataset(result.estimate.within_radius, found.target, recipe, words, names, attributes)
    hard = result.bed.hard_ground_probability
    if hard is not None:
        values = np.where(found.target.active, hard, np.nan)
        texture["hard_ground_probability"] = on_cells(
            found.target, (), values, **BED_VARIABLES["hard_ground_probability"]
        )
    write_netcdf(with_quantities(texture, quantities, found.target, support), aside / "texture.nc")
    write_bed(result.bed, found.target, recipe, aside / "bed.nc", result.moved, into=True)
    if recipe.outputs.geotiff and found.target.corners is not None:  # places have no cells to show
        colours = class_colours(scheme)
        parts, size = recipe.composition.parts, recipe.outputs.geotiff_cell_size_m
        write_geotiffs(aside / "geotiff", result.estimate.within_radius, found.target, parts, words, colours, size)
        quantity_geotiffs(aside / "geotiff", quantities, found.target, size)
        if hard is not None:
            path, grid = aside / "geotiff" / "hard_ground_probability.tif", pixel_grid(found.target, size)
            write_geotiff(
                path, grid, np.where(found.target.active, hard, np.nan), "probability of hard ground", units="1"
            )


def _write_inventory(result: Result, aside: Path) -> None:
    import pandas as pd

    from texture.output import write_csv

    if result.inventory:
        write_csv(aside / "inventory.csv", pd.DataFrame([vars(stock) for stock in result.inventory]).round(3))


def _write_scores(result: Validated, aside: Path) -> None:
    from texture.output import write_csv

    write_csv(aside / "validation.csv", _scores(result))
    write_csv(aside / "held_out.csv", _held_out(result))


def _scores(result: Validated) -> pd.DataFrame:
    """One row for each method, part and score, and for each treatment of zeros that the map's method was tried with.

    The column `stations` says whether they were measured; rows of stations known by words or a median stand apart.
    """
    import pandas as pd

    from texture.validation.told import told_rows

    found = result.validation
    taken = next(t.treatment.label for t in found.tried if t.chosen)
    others = [t for t in found.tried if not t.chosen]
    runs = [(found.chosen, taken), *((m, found.plain.treatment.label) for m in found.methods[1:])]
    runs += [(t.held_out, t.treatment.label) for t in others]
    rows = [
        {
            "method": held.method,
            "treatment": label,
            "folds": found.folds.kind,
            "count": found.folds.count,
            **row,
        }
        for held, label in runs
        for row in (*({"stations": "measured", **vars(score)} for score in held.scores), *told_rows(held.told))
    ]
    rows += [row for quantity in result.quantities for row in quantity.score_rows(found.folds)]
    return pd.DataFrame(rows)


def _held_out(result: Validated) -> pd.DataFrame:
    """Every station's held-out prediction, interval and source row, for each method."""
    import pandas as pd

    parts, observations = result.recipe.composition.parts, result.observations
    table: pd.DataFrame = result.stations.table.iloc[observations.rows].reset_index(drop=True)
    distance = result.validation.folds.held_out_distances(observations.points)
    blocks = []
    for method in result.validation.methods:
        block = table[["id", "survey", "longitude", "latitude", "file", "sheet", "row"]].copy()
        block.insert(0, "method", method.method)
        block["fold"] = result.validation.folds.labels
        block["nearest_kept_m"] = np.round(distance, 1)
        for i, part in enumerate(parts):
            block[f"{part}_measured"] = observations.fractions[:, i]
            block[f"{part}_predicted"] = method.predicted[:, i]
            block[f"{part}_low"], block[f"{part}_high"] = method.low[:, i], method.high[:, i]
        for quantity in result.quantities:
            name, own = quantity.settings.name, {m.method: m for m in quantity.methods}.get(method.method)
            block[f"{name}_measured"] = quantity.measured
            for column in ("predicted", "low", "high"):  # not every method of the composition maps numbers
                block[f"{name}_{column}"] = np.nan if own is None else getattr(own, column)
        blocks.append(block)
    return pd.concat(blocks, ignore_index=True)
