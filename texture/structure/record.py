"""What a fit leaves behind beside the covariance: enough to print it, draw it and judge it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from texture.structure.variogram import EmpiricalVariogram

if TYPE_CHECKING:
    from texture.structure.covariance import Covariance

__all__ = ["Candidate", "Fit"]


@dataclass(frozen=True)
class Candidate:
    """One model that was tried: its name, its covariance and its log-likelihood (NaN from a variogram)."""

    name: str
    covariance: Covariance
    log_likelihood: float


@dataclass(frozen=True)
class Fit:
    """How one column's covariance was fitted.

    Parameters
    ----------
    method : str
        "likelihood" or "variogram": which of the two gave the covariance.
    chosen : str
        Name of the chosen candidate: "exponential", "matern 1.5", "no structure", ...
    candidates : tuple of Candidate
        Every family that was tried, with its restricted log-likelihood.
    variogram : EmpiricalVariogram
        Robust empirical variogram of the values (of their residuals where there is drift).
    variogram_covariance : Covariance
        The weighted least squares fit to it, drawn beside the chosen one.
    stations : int
        Stations with a value.
    evaluations : int
        Likelihood evaluations that were made.
    notes : tuple of str
        Plain sentences about anything a reader should know.
    """

    method: str
    chosen: str
    candidates: tuple[Candidate, ...]
    variogram: EmpiricalVariogram
    variogram_covariance: Covariance
    stations: int
    evaluations: int = 0
    notes: tuple[str, ...] = ()

    @property
    def covariance(self) -> Covariance:
        """The chosen covariance."""
        return next(c.covariance for c in self.candidates if c.name == self.chosen)

    def __str__(self) -> str:
        lines = [f"fit by {self.method} on {self.stations} stations: {self.chosen}", f"  {self.covariance!r}"]
        lines += [f"  {c.name}: log-likelihood {c.log_likelihood:.2f}" for c in self.candidates]
        return "\n".join(lines + [f"  {note}" for note in self.notes])

    def curves(self, distance_m: Any) -> dict[str, Any]:
        """Semivariances of the two fitted curves at given distances, to draw over the empirical points."""
        return {
            "likelihood" if self.method == "likelihood" else "chosen": self.covariance.variogram(distance_m),
            "variogram": self.variogram_covariance.variogram(distance_m),
        }

    def plot(self, ax: Any) -> None:
        """Draw the empirical variogram and both curves on matplotlib axes."""
        v = self.variogram
        ax.plot(v.distance_m, v.semivariance, "o", color="0.3", label="stations")
        h = np.linspace(0.0, float(v.distance_m.max()), 200)[1:]
        for label, gamma in self.curves(h).items():
            ax.plot(h, gamma, label=label)
        ax.set(xlabel="distance (m)", ylabel="semivariance", xlim=(0, None), ylim=(0, None))
        ax.legend()

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers, strings and lists for JSON."""
        return {
            "method": self.method,
            "chosen": self.chosen,
            "stations": self.stations,
            "evaluations": self.evaluations,
            "notes": list(self.notes),
            "candidates": [
                {"name": c.name, "log_likelihood": c.log_likelihood, **c.covariance.to_dict()} for c in self.candidates
            ],
            "variogram": {
                "distance_m": self.variogram.distance_m.tolist(),
                "semivariance": self.variogram.semivariance.tolist(),
                "pairs": self.variogram.pairs.tolist(),
                "covariance": self.variogram_covariance.to_dict(),
            },
        }
