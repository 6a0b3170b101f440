"""`[[mobility]]`: waves and currents, to see which sediment they would move."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Field, field_validator, model_validator

from texture.recipe.settings import NotNegative, Positive, Settings

__all__ = ["Mobility"]


class Mobility(Settings):
    """One `[[mobility]]` block: waves and a current, to see which sediment they would move.

    A value is a number, the name of a variable in `file`, or a GeoTIFF. Variables may be series in time, on the cells or for
    all of them; what moves is then averaged over the times.
    """

    name: Annotated[str, Field(min_length=1)] = Field(
        description="name of the condition, such as a storm's return period"
    )
    file: Path | None = Field(None, description="NetCDF file on the target's cells that holds the variables named here")
    orbital_velocity_m_s: NotNegative | str | Path = Field(0.0, description="of the waves near the bed")
    kind: Literal["rms", "significant", "peak"] | None = Field(
        None,
        description="what that velocity is: root mean square of a sea, its significant value (twice that), or the amplitude "
        "of one wave; mistaking one for another changes the stress by a factor of up to 2.8",
    )
    period_s: Positive | str | Path | None = Field(None, description="wave period")
    current_m_s: NotNegative | str | Path = Field(0.0, description="depth-mean speed of the current")
    depth_m: Positive | str | Path | None = Field(
        None, description="depth that the current flows in; the target's own if absent"
    )
    angle_deg: Annotated[float, Field(ge=0.0, le=180.0)] = Field(
        0.0, description="between waves and current; 0 gives the largest stress"
    )
    hours: Positive | None = Field(
        None, description="how long it lasts; with it, the hours above each class's threshold are told"
    )
    fair_weather: bool = Field(False, description="an ordinary day: mud far beyond its strength would be gone at once")
    flush_ratio: Annotated[float, Field(ge=1.0)] | None = Field(
        None, description="stress over the mud's critical stress that counts as far beyond; 3 if absent"
    )

    @field_validator("orbital_velocity_m_s", "period_s", "current_m_s", "depth_m", mode="before")
    @classmethod
    def _geotiff_or_variable(cls, given: Any) -> Any:
        return Path(given) if isinstance(given, str) and given.lower().endswith((".tif", ".tiff")) else given

    @model_validator(mode="after")
    def _complete(self) -> Mobility:
        waves = self.orbital_velocity_m_s != 0.0
        if waves and self.kind is None:
            raise ValueError(
                f'"{self.name}": kind is missing; say whether the velocity is "rms", "significant" or "peak"'
            )
        if waves != (self.period_s is not None):
            raise ValueError(f'"{self.name}": give orbital_velocity_m_s and period_s together')
        if not waves and self.current_m_s == 0.0:
            raise ValueError(
                f'"{self.name}": has neither waves nor a current; give orbital_velocity_m_s or current_m_s'
            )
        if self.flush_ratio is not None and not self.fair_weather:
            raise ValueError(f'"{self.name}": flush_ratio acts with fair_weather = true only')
        for key in ("orbital_velocity_m_s", "period_s", "current_m_s", "depth_m"):
            value = getattr(self, key)
            if isinstance(value, str) and self.file is None:
                raise ValueError(f'"{self.name}": {key} = "{value}" names a variable, but file is missing')
        return self
