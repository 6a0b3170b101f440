"""Every error the program raises on purpose.

One root, few leaves; each leaf is also a built-in kind, so that code which knows nothing of us can
still catch it::

    TextureError
    ├── RecipeError       ValueError  a setting is wrong, unknown or contradicts another
    ├── SampleError       ValueError  a spreadsheet cannot be read or understood
    ├── TargetError       ValueError  the grid, its land or its mask cannot be used
    ├── CompositionError  ValueError  fractions, size curves or class schemes that make no sense
    ├── StructureError    ValueError  distances, covariances or drift that cannot be fitted or solved
    ├── BedError          ValueError  sediment classes, layers or rim that make no bed
    └── OutputError       OSError     a result cannot be written
    TextureWarning        UserWarning the result stands, but look at this

A message says where, what was found, what was expected and what to do, in one line.
"""

__all__ = [
    "BedError",
    "CompositionError",
    "OutputError",
    "RecipeError",
    "SampleError",
    "StructureError",
    "TargetError",
    "TextureError",
    "TextureWarning",
]


class TextureError(Exception):
    """Root of all errors raised on purpose."""


class RecipeError(TextureError, ValueError):
    """A setting is wrong, unknown or contradicts another one."""


class SampleError(TextureError, ValueError):
    """A file of samples cannot be read or understood."""


class TargetError(TextureError, ValueError):
    """The grid to fill, its land or its mask cannot be used."""


class CompositionError(TextureError, ValueError):
    """Fractions, a size curve or a class scheme make no sense."""


class StructureError(TextureError, ValueError):
    """Points, a covariance or a drift cannot be fitted or solved."""


class BedError(TextureError, ValueError):
    """Sediment classes, layers or the rim do not make a bed."""


class OutputError(TextureError, OSError):
    """A result cannot be written."""


class TextureWarning(UserWarning):
    """The result stands, but deserves a look."""
