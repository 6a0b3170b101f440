"""Figures as pictures inside the page."""

from __future__ import annotations

import base64
import io
from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["Picture", "picture"]


@dataclass(frozen=True)
class Picture:
    """A PNG, its size on the page in CSS pixels, caption and text alternative."""

    content: bytes
    width: int
    height: int
    caption: str
    alt: str

    @property
    def png(self) -> str:
        """The PNG as base64 text, for a page."""
        return base64.b64encode(self.content).decode()


def picture(figure: Figure, caption: str, alt: str, dpi: int = 150) -> Picture:
    """Render a figure; no date or version is stored in it, so that the same figure gives the same bytes."""
    stream = io.BytesIO()
    figure.savefig(stream, format="png", dpi=dpi, facecolor="white", metadata={"Software": None})
    width, height = figure.get_size_inches()
    return Picture(stream.getvalue(), round(96 * width), round(96 * height), caption, alt)
