"""`texture inspect`: whether a bed file is ready for a model."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from texture_cli.options import JsonFlag, Quiet
from texture_cli.running import DONE, FAILED, Report, run

__all__ = ["inspect"]


def inspect(
    bed: Annotated[Path, typer.Argument(help="Bed file to look at.", show_default=False, metavar="BED.nc")],
    names: Annotated[
        Path | None,
        typer.Option("--names", help="Names file that the bed was written through.", metavar="NAMES"),
    ] = None,
    erosion_depth: Annotated[
        float, typer.Option("--erosion-depth", help="Depth in metres that the run may cut.", min=0.0)
    ] = 1.0,
    time_step: Annotated[
        float | None, typer.Option("--time-step", help="The model's time step in seconds.", show_default=False)
    ] = None,
    water_layer: Annotated[
        float | None,
        typer.Option("--water-layer", help="The model's thinnest layer of water in metres.", show_default=False),
    ] = None,
    active_layer: Annotated[
        float | None,
        typer.Option("--active-layer", help="Thickness in metres that the model mixes at once.", show_default=False),
    ] = None,
    cf: Annotated[
        bool, typer.Option("--cf", help="Run the CF compliance checker as well, where it is installed (seconds).")
    ] = False,
    quiet: Quiet = False,
    as_json: JsonFlag = False,
) -> None:
    """Check a bed file: holes, sums, thickness, rim, land, isolated cells, grain properties, CF.

    Exit code 1 when a check fails.

    Example: texture inspect out/bed.nc --names names.toml
    """

    def work(progress: Any) -> Report:
        from texture.bed import check_bed
        from texture.output import bed_arrays, check_cf, open_bed

        arrays = bed_arrays(open_bed(bed, names))
        checks = check_bed(arrays, erosion_depth, time_step, water_layer, active_layer)
        if cf:
            checks.append(check_cf(bed))
        width = max(len(c.name) for c in checks)
        lines = [f"{c.verdict:<5} {c.name:<{width}}  {c.detail}" for c in checks]
        counts = {verdict: sum(c.verdict == verdict for c in checks) for verdict in ("pass", "warn", "fail")}
        lines.append(f"{bed.name}: {counts['pass']} pass, {counts['warn']} warn, {counts['fail']} fail")
        data = {"checks": [vars(c) for c in checks], **counts}
        return Report(lines, data, FAILED if counts["fail"] else DONE)

    run(work, quiet=quiet, as_json=as_json)
