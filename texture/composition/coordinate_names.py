"""A formula for each log-ratio coordinate, such as ``ln(mud / (sand + gravel))``."""

from collections.abc import Sequence

from texture.composition.partition import Split

__all__ = ["coordinate_name"]


def coordinate_name(kind: str, parts: Sequence[str], split: Split) -> str:
    """What the coordinate of a split is called, for one of the kinds of `texture.composition.LogRatio`."""
    top = [parts[j] for j in split.numerator]
    bottom = [parts[j] for j in split.denominator]
    if kind == "shares":
        both = [parts[j] for j in sorted(split.numerator + split.denominator)]
        return _sum(top) if len(both) == len(parts) else f"{_sum(top)} / {_sum(both)}"
    if kind == "ilr":
        r, s = len(top), len(bottom)
        return f"sqrt({r * s}/{r + s}) ln({_geometric(top)} / {_geometric(bottom)})"
    return f"ln({_sum(top)} / {_sum(bottom)})"


def _sum(names: list[str]) -> str:
    return names[0] if len(names) == 1 else "(" + " + ".join(names) + ")"


def _geometric(names: list[str]) -> str:
    return names[0] if len(names) == 1 else f"gmean({', '.join(names)})"
