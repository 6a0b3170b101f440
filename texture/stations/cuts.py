"""Where a survey cuts mud from sand and sand from gravel, as its headings say; surveys that cut elsewhere are told apart."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from texture.recipe import Intake
from texture.stations.columns import Column
from texture.stations.sizes import SAME_LIMIT_PHI, SizeColumn, size_in
from texture.stations.where import Where

__all__ = ["cuts_of"]

# Which limit of a part's own size class is which cut: the coarse one of mud, both of sand, the fine one of gravel.
_ENDS = {"mud": ("coarse",), "silt": ("coarse",), "sand": ("fine", "coarse"), "gravel": ("fine",)}


def cuts_of(
    columns: Mapping[str, Column], sizes: Sequence[SizeColumn], intake: Intake, where: Where
) -> tuple[float, float, list[str]]:
    """Cut sizes of one table in mm: mud to sand, sand to gravel; NaN where its headings do not say.

    Size classes are cut where the recipe says. Named parts come as they were cut; a cut elsewhere than the recipe's is
    noted, for such parts are mapped together with those of other surveys as they are.
    """
    if sizes:
        return intake.mud_below_mm, intake.gravel_above_mm, []
    mud = gravel = math.nan
    for role, ends in _ENDS.items():
        size = size_in(columns[role].heading, None) if role in columns else None
        if size is None or size[2] != "class":
            continue
        found = {"coarse": size[0], "fine": size[1]}
        for end in ends:
            mm = 2.0 ** -found[end] if math.isfinite(found[end]) else math.nan
            if (role == "sand" and end == "coarse") or role == "gravel":
                gravel = mm if math.isnan(gravel) else gravel
            else:
                mud = mm if math.isnan(mud) else mud
    notes = []
    for name, mm, ours in (("mud ends", mud, intake.mud_below_mm), ("gravel begins", gravel, intake.gravel_above_mm)):
        if not math.isnan(mm) and abs(math.log2(mm / ours)) > SAME_LIMIT_PHI:
            notes.append(
                f"{where.text()}: its {name} at {mm:.4g} mm, not at {ours:.4g} mm; DOUBT: it is mapped with the others as it is"
            )
    return mud, gravel, notes
