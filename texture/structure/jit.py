"""Where compiled functions of this room and of `texture.predict` take their decorator from."""

from texture.compiling import compiled

__all__ = ["compiled"]
