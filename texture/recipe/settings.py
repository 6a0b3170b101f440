"""What every block of the recipe rests on: frozen settings, kinds of numbers, and checks of names."""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field

__all__ = ["Fraction", "NotNegative", "Positive", "Settings", "check_composition", "check_names", "nearest_known"]

Fraction = Annotated[float, Field(ge=0.0, le=1.0)]
Positive = Annotated[float, Field(gt=0.0)]
NotNegative = Annotated[float, Field(ge=0.0)]


class Settings(BaseModel):
    """Base of all blocks: immutable, and an unknown key is an error."""

    model_config = ConfigDict(frozen=True, extra="forbid", populate_by_name=True, allow_inf_nan=False)


def check_names(where: str, given: dict[str, float], known: tuple[str, ...]) -> None:
    """Refuse a name that is not known, and say the nearest known one."""
    for name in given:
        if name not in known:
            raise ValueError(f'{where}: unknown name "{name}"; {nearest_known(name, known)}')


def check_composition(where: str, given: dict[str, float], parts: tuple[str, ...], classes: tuple[str, ...]) -> None:
    """Refuse a composition that mixes parts with classes or does not sum to 1."""
    if not (set(given) <= set(parts) or set(given) <= set(classes)):
        check_names(where, given, tuple(dict.fromkeys((*parts, *classes))))
        raise ValueError(f"{where}: mixes parts and classes; give {list(parts)} or {list(classes)}")
    total = sum(given.values())
    if abs(total - 1.0) > 1e-9:  # typed decimals; anything further off is a mistake
        raise ValueError(f"{where}: fractions sum to {total:g}, expected 1")


def nearest_known(word: str, known: tuple[str, ...]) -> str:
    """Say which known word was probably meant, or all of them."""
    import difflib

    close = difflib.get_close_matches(word, known, n=1, cutoff=0.5)
    return f'did you mean "{close[0]}"?' if close else f"known: {', '.join(known)}"
