"""`[report]`: what the page shows."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from texture.recipe.settings import Settings

__all__ = ["Report"]


class Report(Settings):
    """What the page shows."""

    stations: Literal["shown", "hidden"] = Field(
        "shown",
        description="whether positions of stations stand on the page, map.png and the figures; hide them where they are confidential",
    )
