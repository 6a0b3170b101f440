"""The spatial structure of the values: nested covariance structures, small-scale variation, noise, survey offsets."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError
from texture.structure.models import MODELS, model_code, scale_factor

if TYPE_CHECKING:
    from texture.structure.record import Fit

__all__ = ["Covariance", "CovarianceSet", "Structure", "check_points"]

Array = NDArray[np.float64]


def check_points(points: ArrayLike, dimensions: int | None = None) -> Array:
    """Points as a finite C-ordered float64 array (n, d); raises `StructureError` otherwise."""
    array = np.ascontiguousarray(points, dtype=np.float64)
    if array.ndim != 2 or array.shape[1] < 1:
        raise StructureError(f"points: found shape {array.shape}, expected (n, d) with one row per point")
    if dimensions is not None and array.shape[1] != dimensions:
        raise StructureError(
            f"points: found {array.shape[1]} coordinates, expected {dimensions} as in the stations; "
            "give stations and targets in the same space"
        )
    bad = ~np.isfinite(array).all(axis=1)
    if bad.any():
        raise StructureError(
            f"points: row {int(np.argmax(bad))} has a coordinate that is not a finite number "
            f"({int(bad.sum())} such rows); leave such points out"
        )
    return array


def _check_number(name: str, value: float, least: float = 0.0, *, open_end: bool = False) -> float:
    number = float(value)
    if not math.isfinite(number) or number < least or (open_end and number == least):
        bound = f"above {least:g}" if open_end else f"of at least {least:g}"
        raise StructureError(f"{name}: found {value!r}, expected a finite number {bound}")
    return number


@dataclass(frozen=True)
class Structure:
    """One nested structure of a covariance.

    Parameters
    ----------
    model : {"spherical", "cubic", "exponential", "gaussian", "matern"}
        Correlation model; spherical and cubic are valid in three dimensions at most.
    sill : float, > 0
        Variance of this structure, in squared units of the values.
    range_m : float, > 0
        Distance in metres at which the correlation has fallen to 0.05; for spherical and cubic where it reaches 0.
        A model's own parameter is `scale_m` (exponential: ``exp(-h / a)`` with a = range / 2.9957).
    smoothness : float, optional
        Matérn only (and needed there): nu, between 0.1 and 20.

    Examples
    --------
    >>> round(Structure("exponential", 0.6, 2995.732273553991).scale_m, 6)
    1000.0
    """

    model: str
    sill: float
    range_m: float
    smoothness: float | None = None

    def __post_init__(self) -> None:
        if self.model not in MODELS:
            known = ", ".join(sorted(MODELS))
            raise StructureError(f"model: found {self.model!r}, expected one of {known}")
        object.__setattr__(self, "sill", _check_number("sill", self.sill, open_end=True))
        object.__setattr__(self, "range_m", _check_number("range_m", self.range_m, open_end=True))
        if (self.model == "matern") != (self.smoothness is not None):
            expected = "a number such as 1.5" if self.model == "matern" else "none"
            raise StructureError(f"smoothness of {self.model}: found {self.smoothness!r}, expected {expected}")
        if self.smoothness is not None:
            nu = float(self.smoothness)
            if not 0.1 <= nu <= 20.0:
                raise StructureError(f"smoothness: found {nu:g}, expected 0.1 to 20; above that use the gaussian model")
            object.__setattr__(self, "smoothness", nu)

    @property
    def scale_m(self) -> float:
        """The model's own length parameter in metres (see `texture.structure.models`)."""
        return self.range_m / scale_factor(self.model, self.smoothness)

    @property
    def dimensions(self) -> int | None:
        """Largest number of dimensions in which the model is valid, None for all."""
        return MODELS[self.model].dimensions

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers and strings, for TOML or JSON."""
        record: dict[str, Any] = {"model": self.model, "sill": self.sill, "range_m": self.range_m}
        if self.smoothness is not None:
            record["smoothness"] = self.smoothness
        return record


@dataclass(frozen=True)
class Covariance:
    """Covariance of the values between places, and the variances that belong to samples rather than places.

    Parameters
    ----------
    structures : sequence of Structure
        Nested structures; may be empty (no spatial structure at all).
    small_scale : float, >= 0
        Variance of the bed's own patchiness below the sampling distance. It is part of the bed: two points share it
        only where they coincide, and a prediction at a station honours it.
    noise : float, >= 0
        Variance of measurement noise, the same for each sample; it is filtered out by prediction.
    survey : float, >= 0
        Variance of the offset that all samples of one survey share; it is removed by prediction.
    anisotropy : (azimuth_deg, ratio), optional
        Direction of the longer axis in degrees clockwise from grid north of the working projection, and longer over
        shorter range. `range_m` lies along the longer axis. Acts on the first two coordinates.
    axis_scales : sequence of float, optional
        One factor per coordinate, applied before distances are taken: metres that one unit of the coordinate
        counts for. Needed where covariates stand beside x and y.
    fit_record : Fit, optional
        How the covariance was fitted, where it was.

    Examples
    --------
    >>> c = Covariance([Structure("exponential", 0.6, 3000.0)], small_scale=0.1, noise=0.05)
    >>> c
    Covariance([Structure('exponential', 0.6, range_m=3000)], small_scale=0.1, noise=0.05)
    >>> c.sill
    0.7
    >>> Covariance.from_dict(c.to_dict()) == c
    True
    """

    structures: tuple[Structure, ...]
    small_scale: float = 0.0
    noise: float = 0.0
    survey: float = 0.0
    anisotropy: tuple[float, float] | None = None
    axis_scales: tuple[float, ...] | None = None
    fit_record: Fit | None = field(default=None, compare=False, repr=False)

    def __init__(
        self,
        structures: Sequence[Structure],
        small_scale: float = 0.0,
        noise: float = 0.0,
        survey: float = 0.0,
        anisotropy: tuple[float, float] | None = None,
        axis_scales: Sequence[float] | None = None,
        fit_record: Fit | None = None,
    ) -> None:
        if isinstance(structures, Structure):
            structures = (structures,)
        for item in structures:
            if not isinstance(item, Structure):
                raise StructureError(f"structures: found {item!r}, expected Structure objects")
        put = object.__setattr__
        put(self, "structures", tuple(structures))
        put(self, "small_scale", _check_number("small_scale", small_scale))
        put(self, "noise", _check_number("noise", noise))
        put(self, "survey", _check_number("survey", survey))
        if not self.structures and self.small_scale + self.noise == 0.0:
            raise StructureError("covariance: no structure, small-scale variation or noise; give at least one")
        if anisotropy is not None:
            azimuth, ratio = anisotropy
            if not math.isfinite(float(azimuth)) or not 1.0 <= float(ratio) <= 1000.0:
                raise StructureError(
                    f"anisotropy: found {anisotropy!r}, expected (azimuth in degrees, longer over shorter range >= 1)"
                )
            anisotropy = (float(azimuth), float(ratio))
        put(self, "anisotropy", anisotropy)
        if axis_scales is not None:
            axis_scales = tuple(_check_number("axis_scales", s, open_end=True) for s in axis_scales)
        put(self, "axis_scales", axis_scales)
        put(self, "fit_record", fit_record)

    def __repr__(self) -> str:
        inner = []
        for s in self.structures:
            nu = "" if s.smoothness is None else f", smoothness={s.smoothness:g}"
            inner.append(f"Structure({s.model!r}, {s.sill:g}, range_m={s.range_m:g}{nu})")
        parts = [f"[{', '.join(inner)}]"]
        parts += [f"{n}={getattr(self, n):g}" for n in ("small_scale", "noise", "survey") if getattr(self, n)]
        if self.anisotropy is not None:
            parts.append("anisotropy=({:g}, {:g})".format(*self.anisotropy))
        if self.axis_scales is not None:
            parts.append("axis_scales=({})".format(", ".join(f"{s:g}" for s in self.axis_scales)))
        return f"Covariance({', '.join(parts)})"

    def plot(self, ax: Any = None) -> Any:
        """Draw its variogram on matplotlib axes; see `texture.structure.drawing.plot_covariance`."""
        from texture.structure.drawing import plot_covariance

        return plot_covariance(self, ax)

    @property
    def sill(self) -> float:
        """Variance of the bed at a point: all structures and the small-scale variation."""
        return sum(s.sill for s in self.structures) + self.small_scale

    @property
    def range_m(self) -> float:
        """Longest range of the structures in metres, 0 where there are none."""
        return max((s.range_m for s in self.structures), default=0.0)

    @property
    def packed(self) -> Array:
        """The structures as rows (code, sill, 1 / scale, smoothness) for compiled code."""
        rows = [
            (model_code(s.model, s.smoothness), s.sill, 1.0 / s.scale_m, s.smoothness or 0.0) for s in self.structures
        ]
        return np.array(rows, dtype=np.float64).reshape(len(rows), 4)

    def check_dimensions(self, dimensions: int) -> None:
        """Refuse models, anisotropy or scales that make no sense in so many dimensions."""
        for s in self.structures:
            if s.dimensions is not None and dimensions > s.dimensions:
                raise StructureError(
                    f"{s.model} model in {dimensions} dimensions: it is valid in {s.dimensions} at most; "
                    "use exponential or matern"
                )
        if self.anisotropy is not None and dimensions < 2:
            raise StructureError("anisotropy needs at least two coordinates; found one")
        if self.axis_scales is not None and len(self.axis_scales) != dimensions:
            raise StructureError(
                f"axis_scales: found {len(self.axis_scales)} factors, expected one for each of {dimensions} coordinates"
            )

    def metric(self, points: ArrayLike) -> Array:
        """Points in the covariance's own metric, where plain distance is what the models see; shape (n, d)."""
        array = check_points(points)
        self.check_dimensions(array.shape[1])
        if self.axis_scales is not None:
            array = array * np.array(self.axis_scales)
        if self.anisotropy is not None:
            azimuth, ratio = math.radians(self.anisotropy[0]), self.anisotropy[1]
            along = array[:, 0] * math.sin(azimuth) + array[:, 1] * math.cos(azimuth)
            across = array[:, 0] * math.cos(azimuth) - array[:, 1] * math.sin(azimuth)
            array = np.ascontiguousarray(np.column_stack([along, across * ratio, array[:, 2:]]))
        return array

    def scaled(self, factor: float) -> Covariance:
        """Every variance multiplied: sills, small-scale, noise and survey offsets alike, so that kriging weights stay.

        >>> Covariance([Structure("exponential", 1.0, 10.0)], small_scale=0.5).scaled(2.0).sill
        3.0
        """
        structures = [Structure(s.model, s.sill * factor, s.range_m, s.smoothness) for s in self.structures]
        small_scale, noise, survey = self.small_scale * factor, self.noise * factor, self.survey * factor
        return Covariance(structures, small_scale, noise, survey, self.anisotropy, self.axis_scales, self.fit_record)

    def matrix(self, points: ArrayLike, points2: ArrayLike | None = None) -> Array:
        """Covariance of the bed between points, shape (n, m); noise and survey offsets are not in it.

        Parameters
        ----------
        points, points2 : float array, shape (n, d) and (m, d), metres
            `points2` defaults to `points`. Points within a micrometre share the small-scale variation.
        """
        from texture.structure.compiled import covariance_matrix, distance_matrix

        a = self.metric(points)
        b = a if points2 is None else self.metric(check_points(points2, a.shape[1]))
        result: Array = covariance_matrix(self.packed, self.small_scale, distance_matrix(a, b))
        return result

    def variogram(self, distance_m: ArrayLike) -> Array:
        """Semivariance of single samples of one survey at distances along the longer axis (noise included)."""
        from texture.structure.compiled import covariance_matrix

        h = np.atleast_2d(np.asarray(distance_m, dtype=np.float64))
        smooth = covariance_matrix(self.packed, self.small_scale, np.ascontiguousarray(h))
        gamma: Array = (self.sill + self.noise - smooth).reshape(np.shape(distance_m))
        return np.where(np.asarray(distance_m) == 0.0, 0.0, gamma)

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers, strings and lists, for TOML or JSON; `from_dict` reads it back."""
        record: dict[str, Any] = {
            "structures": [s.to_dict() for s in self.structures],
            "small_scale": self.small_scale,
            "noise": self.noise,
            "survey": self.survey,
        }
        if self.anisotropy is not None:
            record["anisotropy"] = list(self.anisotropy)
        if self.axis_scales is not None:
            record["axis_scales"] = list(self.axis_scales)
        return record

    @classmethod
    def from_dict(cls, record: dict[str, Any]) -> Covariance:
        """Covariance from what `to_dict` gave."""
        known = {"structures", "small_scale", "noise", "survey", "anisotropy", "axis_scales"}
        unknown = set(record) - known
        if unknown or "structures" not in record:
            raise StructureError(f"covariance record: found keys {sorted(record)}, expected {sorted(known)}")
        rest = {k: v for k, v in record.items() if k != "structures"}
        return cls([Structure(**s) for s in record["structures"]], **rest)

    @staticmethod
    def fit(
        points: ArrayLike,
        values: ArrayLike,
        method: str = "likelihood",
        noise_variance: ArrayLike | None = None,
        survey: ArrayLike | None = None,
        drift: ArrayLike | None = None,
        groups: Sequence[Sequence[int]] | None = None,
        start: Covariance | CovarianceSet | None = None,
        seed: int = 0,
        anisotropy: str | tuple[float, float] | None = None,
        **options: Any,
    ) -> Any:
        """Fit a covariance to values at points; see `texture.structure.fit.fit_covariance` for all details.

        With `anisotropy="fit"`, or (azimuth in degrees, ratio), ranges depend on direction; see
        `texture.structure.anisotropy.fit_with_anisotropy`.

        Returns
        -------
        Covariance for values (n,), CovarianceSet for values (n, v)
        """
        from texture.structure.fit import fit_covariance
        from texture.structure.plane import check_metres

        check_metres(check_points(points))
        if anisotropy is not None:
            from texture.structure.anisotropy import fit_with_anisotropy

            return fit_with_anisotropy(
                points, values, anisotropy, start, seed, method=method, noise_variance=noise_variance, survey=survey,
                drift=drift, groups=groups, **options,
            )  # fmt: skip
        return fit_covariance(points, values, method, noise_variance, survey, drift, groups, start, seed, **options)


@dataclass(frozen=True)
class CovarianceSet(Sequence[Covariance]):
    """One covariance per column of values and one residual correlation matrix between the columns.

    Parameters
    ----------
    covariances : sequence of Covariance
    correlation : float array, shape (v, v), optional
        Correlation between the columns' kriging errors: symmetric, ones on the diagonal, positive semi-definite.
        Identity when not given.

    Examples
    --------
    >>> one = Covariance([Structure("spherical", 1.0, 500.0)])
    >>> pair = CovarianceSet([one, one], [[1.0, 0.3], [0.3, 1.0]])
    >>> len(pair), pair[0].sill, float(pair.correlation[0, 1])
    (2, 1.0, 0.3)
    """

    covariances: tuple[Covariance, ...]
    correlation: Array = field(compare=False)

    def __init__(self, covariances: Sequence[Covariance], correlation: ArrayLike | None = None) -> None:
        if not covariances or not all(isinstance(c, Covariance) for c in covariances):
            raise StructureError("covariance set: expected at least one Covariance and nothing else")
        size = len(covariances)
        matrix = np.eye(size) if correlation is None else np.array(correlation, dtype=np.float64)
        if matrix.shape != (size, size) or not np.isfinite(matrix).all():
            raise StructureError(f"correlation: found shape {matrix.shape}, expected ({size}, {size}) and finite")
        if np.abs(matrix - matrix.T).max() > 1e-9 or np.abs(np.diag(matrix) - 1.0).max() > 1e-9:
            raise StructureError("correlation: expected a symmetric matrix with ones on its diagonal")
        # 1e-9 is what symmetric rounding of a handful of columns can leave below zero.
        if np.linalg.eigvalsh(matrix).min() < -1e-9:
            raise StructureError(
                "correlation: the matrix is not positive semi-definite; no columns correlate like this"
            )
        matrix.setflags(write=False)
        object.__setattr__(self, "covariances", tuple(covariances))
        object.__setattr__(self, "correlation", matrix)

    def __len__(self) -> int:
        return len(self.covariances)

    def __getitem__(self, index: Any) -> Any:
        return self.covariances[index]

    def __iter__(self) -> Iterator[Covariance]:
        return iter(self.covariances)

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, CovarianceSet):
            return NotImplemented
        return self.covariances == other.covariances and np.array_equal(self.correlation, other.correlation)

    def __hash__(self) -> int:
        return hash(self.covariances)

    def __repr__(self) -> str:
        lines = ",\n  ".join(repr(c) for c in self.covariances)
        rows = np.array2string(self.correlation, precision=3, separator=", ").replace("\n", "")
        return f"CovarianceSet([\n  {lines}],\n  correlation={rows})"

    def scaled(self, factors: ArrayLike) -> CovarianceSet:
        """Each column's covariance multiplied by its own factor, shape (v,); the correlation stays."""
        return CovarianceSet(
            [c.scaled(float(f)) for c, f in zip(self, np.asarray(factors), strict=True)], self.correlation
        )

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers, strings and lists; `from_dict` reads it back."""
        return {"covariances": [c.to_dict() for c in self], "correlation": self.correlation.tolist()}

    @classmethod
    def from_dict(cls, record: dict[str, Any]) -> CovarianceSet:
        """Covariance set from what `to_dict` gave."""
        if set(record) != {"covariances", "correlation"}:
            raise StructureError(f"covariance set: found keys {sorted(record)}, expected covariances and correlation")
        return cls([Covariance.from_dict(c) for c in record["covariances"]], record["correlation"])
