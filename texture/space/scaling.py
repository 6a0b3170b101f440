"""Landmark multidimensional scaling: points whose plain distances come as near as can be to given ones.

Classical scaling of a few landmarks, and every other place by its distances to them (de Silva & Tenenbaum 2004, "Sparse
multidimensional scaling using landmark points").
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Scaling", "stress"]

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Scaling:
    """Coordinates from distances to landmarks.

    Attributes
    ----------
    eigenvalues : float array, shape (l,)
        Of the doubly centred squared distances between landmarks, largest first, m². Negative ones are what no flat space can hold.
    axes : float array, shape (l, k)
        Columns: eigenvectors over the roots of their eigenvalues.
    mean_square : float array, shape (l,)
        Mean squared distance of each landmark from all.
    """

    eigenvalues: Floats
    axes: Floats
    mean_square: Floats

    @classmethod
    def of(cls, distances: Floats, dimensions: int) -> Scaling:
        """Scale landmarks from the distances between them, shape (l, l), to at most so many dimensions.

        Examples
        --------
        >>> corners = np.array([[0.0, 0.0], [4.0, 0.0], [4.0, 3.0], [0.0, 3.0]])
        >>> d = np.linalg.norm(corners[:, None] - corners, axis=2)
        >>> scaling = Scaling.of(d, 2)
        >>> found = scaling.place(d)
        >>> bool(np.allclose(np.linalg.norm(found[:, None] - found, axis=2), d))
        True
        >>> scaling.eigenvalues[:2].round(9).tolist()
        [16.0, 9.0]
        """
        square = np.asarray(distances, dtype=np.float64) ** 2
        mean = square.mean(axis=0)
        centred = -0.5 * (square - mean - mean[:, None] + square.mean())
        value, vector = np.linalg.eigh(0.5 * (centred + centred.T))
        value, vector = value[::-1], vector[:, ::-1]
        kept = value[:dimensions] > 1e-9 * value[0]
        value_kept, vector = value[:dimensions][kept], vector[:, :dimensions][:, kept]
        # An eigenvector's sign is free: its largest entry is made positive, so that it is the same everywhere.
        vector = vector * np.sign(vector[np.abs(vector).argmax(axis=0), np.arange(vector.shape[1])])
        return cls(value, vector / np.sqrt(value_kept), mean)

    @property
    def dimensions(self) -> int:
        """Number of coordinates."""
        return int(self.axes.shape[1])

    def place(self, distances: Floats) -> Floats:
        """Coordinates of places from their distances to the landmarks, shape (m, l) to (m, k)."""
        return np.asarray(-0.5 * (distances**2 - self.mean_square) @ self.axes)


def stress(given: Floats, found: Floats) -> float:
    """Kruskal's (1964) stress-1: root of the squared differences over the squared given distances; 0 is perfect."""
    return float(np.sqrt(((found - given) ** 2).sum() / (given**2).sum()))
