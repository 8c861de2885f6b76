"""Noise models: how the variance of a reading depends on its mean.

The variance of a reading is scale² · G, where G is the variance function kept here
and the scale is estimated from the residuals, unless standard uncertainties are
known. Weights are 1/G at the *fitted* mean, never at a single observed response
(Carroll and Ruppert, Transformation and Weighting in Regression, 1988, ch. 2).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields, replace
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.errors import InputError, MethodError

Array = NDArray[np.float64]

# A response near zero must not get an unbounded weight: the mean enters a power no
# smaller than this share of the range of the responses (common practice).
FLOOR_SHARE = 1e-3


class NoiseModel(ABC):
    """Variance function G of a reading, up to a common scale."""

    kind: ClassVar[str]

    @abstractmethod
    def variance(self, mean: Array, concentration: Array) -> Array:
        """G at fitted responses ``mean`` and concentrations, same shape."""

    @abstractmethod
    def to_dict(self) -> dict[str, Any]:
        """Plain form for the record; `noise_from_dict` reads it back."""

    @property
    @abstractmethod
    def label(self) -> str:
        """What was used, in words."""

    @property
    def known_scale(self) -> bool:
        """Whether G is the variance itself, so that no scale is estimated."""
        return False

    @property
    def follows_fit(self) -> bool:
        """Whether G changes with the fitted means, so that the fit is iterated."""
        return True

    def scale(self, residual_sum: ArrayLike, degrees_of_freedom: ArrayLike) -> tuple[Array, Array]:
        """Standard deviation that multiplies the model, and the degrees of freedom behind it.

        Parameters
        ----------
        residual_sum, degrees_of_freedom : (R,) arrays or numbers
            Weighted sum of squared residuals, and readings minus free parameters, of each run.

        Returns
        -------
        tuple of arrays
            The first is nan where a run has no degrees of freedom.
        """
        nu = np.asarray(degrees_of_freedom, dtype=np.float64)
        if self.known_scale:
            return np.ones_like(nu), np.full_like(nu, np.inf)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(nu > 0, np.sqrt(np.asarray(residual_sum) / nu), np.nan), nu

    def at_standards(self, mean: Array, concentration: Array) -> Array:
        """G of the standards themselves."""
        return self.variance(mean, concentration)

    def bound_to(self, response: Array) -> NoiseModel:
        """The same model with what it needs of the responses of a run (n,), or of R runs (n, R)."""
        return self

    def after_fit(self, mean: Array) -> NoiseModel:
        """The same model with what it needs of the fitted means."""
        return self


@dataclass(frozen=True, slots=True)
class UniformNoise(NoiseModel):
    """The same variance everywhere."""

    kind: ClassVar[str] = "uniform"

    def variance(self, mean: Array, concentration: Array) -> Array:
        """One everywhere."""
        return np.ones_like(np.asarray(mean, dtype=np.float64))

    @property
    def label(self) -> str:
        """In words."""
        return "uniform"

    @property
    def follows_fit(self) -> bool:
        """Nothing to iterate."""
        return False

    def to_dict(self) -> dict[str, Any]:
        """Plain form."""
        return {"kind": self.kind}


@dataclass(frozen=True, slots=True)
class PowerOfMeanNoise(NoiseModel):
    """Variance proportional to |mean|^exponent; exponent 2 is a constant CV.

    In a stack exponent and floor may be arrays, one value for each run.
    """

    exponent: float | Array
    origin: str = "assumed"
    floor: float | Array | None = None
    kind: ClassVar[str] = "power-of-mean"

    def variance(self, mean: Array, concentration: Array) -> Array:
        """|mean|^exponent, not below the floor."""
        floor = np.finfo(float).tiny if self.floor is None else self.floor
        size = np.maximum(np.abs(mean), floor)
        return np.asarray(size**self.exponent, dtype=np.float64)

    def bound_to(self, response: Array) -> NoiseModel:
        """Set the floor from the range of the responses."""
        return self if self.floor is not None else replace(self, floor=response_floor(response))

    @property
    def label(self) -> str:
        """In words."""
        if self.exponent == 2.0:
            return f"relative ({self.origin})"
        return f"variance ∝ response^{self.exponent:.4g} ({self.origin})"

    def to_dict(self) -> dict[str, Any]:
        """Plain form."""
        return {"kind": self.kind, "exponent": self.exponent, "origin": self.origin, "floor": self.floor}


@dataclass(frozen=True, slots=True)
class AdditiveRelativeNoise(NoiseModel):
    """Variance proportional to ratio² + mean²: a constant and a relative part.

    In a stack the ratio may be an array, one value for each run.
    """

    ratio: float | Array
    origin: str = "assumed"
    kind: ClassVar[str] = "additive-relative"

    def variance(self, mean: Array, concentration: Array) -> Array:
        """ratio² + mean²."""
        return np.asarray(self.ratio**2 + np.asarray(mean) ** 2, dtype=np.float64)

    @property
    def label(self) -> str:
        """In words."""
        return f"constant and relative part, equal at response {self.ratio:.4g} ({self.origin})"

    def to_dict(self) -> dict[str, Any]:
        """Plain form."""
        return {"kind": self.kind, "ratio": self.ratio, "origin": self.origin}


@dataclass(frozen=True, slots=True)
class PowerOfConcentrationNoise(NoiseModel):
    """Variance proportional to concentration^exponent (the 1/x, 1/x² of legacy protocols)."""

    exponent: float
    kind: ClassVar[str] = "power-of-concentration"

    def variance(self, mean: Array, concentration: Array) -> Array:
        """concentration^exponent."""
        size = np.maximum(np.abs(concentration), np.finfo(float).tiny)
        return np.asarray(size**self.exponent, dtype=np.float64)

    def at_standards(self, mean: Array, concentration: Array) -> Array:
        """G of the standards; a standard at 0 would get an unbounded weight."""
        if self.exponent > 0 and np.any(concentration == 0):
            i = int(np.flatnonzero(concentration == 0)[0])
            raise InputError(
                f"concentration[{i}] is 0, where noise assumed proportional to concentration vanishes; "
                "leave that standard out or assume noise of the response"
            )
        return self.variance(mean, concentration)

    @property
    def label(self) -> str:
        """In words."""
        return f"variance ∝ concentration^{self.exponent:.4g} (assumed)"

    @property
    def follows_fit(self) -> bool:
        """The concentrations do not move."""
        return False

    def to_dict(self) -> dict[str, Any]:
        """Plain form."""
        return {"kind": self.kind, "exponent": self.exponent}


@dataclass(frozen=True, slots=True)
class GivenNoise(NoiseModel):
    """Standard deviations handed in with the standards, known or up to a common factor.

    Between the standards the standard deviation is interpolated over the fitted
    response, beyond them the nearest one holds.
    """

    sd: tuple[float, ...] | Array
    known: bool
    mean: tuple[float, ...] = ()
    kind: ClassVar[str] = "given"

    def variance(self, mean: Array, concentration: Array) -> Array:
        """Interpolated variance at responses ``mean``."""
        order = np.argsort(self.mean, kind="stable")
        at, sd = np.asarray(self.mean)[order], np.asarray(self.sd)[order]
        at, first, count = np.unique(at, return_index=True, return_counts=True)
        pooled = np.add.reduceat(sd**2, first) / count
        return np.asarray(np.interp(mean, at, np.sqrt(pooled)) ** 2, dtype=np.float64)

    def at_standards(self, mean: Array, concentration: Array) -> Array:
        """The squares of the standard deviations given."""
        return np.asarray(self.sd, dtype=np.float64) ** 2

    def after_fit(self, mean: Array) -> NoiseModel:
        """Remember where on the response axis each standard deviation belongs."""
        return replace(self, mean=tuple(float(m) for m in mean))

    @property
    def known_scale(self) -> bool:
        """Whether the standard deviations are absolute."""
        return self.known

    @property
    def follows_fit(self) -> bool:
        """Given once and for all."""
        return False

    @property
    def label(self) -> str:
        """In words."""
        return "known standard uncertainties" if self.known else "given relative standard deviations"

    def to_dict(self) -> dict[str, Any]:
        """Plain form."""
        return {"kind": self.kind, "sd": list(self.sd), "known": self.known, "mean": list(self.mean)}


def of_runs(noise: NoiseModel, which: NDArray[np.intp]) -> NoiseModel:
    """The noise model of some runs of a stack; what all runs share stays as it is."""
    return replace(noise, **{name: values.take(which, axis=-1) for name, values in _by_run(noise).items()})  # type: ignore[type-var]


def of_run(noise: NoiseModel, run: int) -> NoiseModel:
    """The noise model of one run of a stack by itself."""
    return replace(noise, **{name: float(values[run]) for name, values in _by_run(noise).items()})  # type: ignore[type-var]


def with_runs(noise: NoiseModel, which: NDArray[np.intp], theirs: NoiseModel) -> NoiseModel:
    """The noise model of a stack in which some runs get another one of the same family."""
    changed = {name: values.copy() for name, values in _by_run(noise).items()}
    for name, values in _by_run(theirs).items():
        changed[name][..., which] = values
    return replace(noise, **changed)  # type: ignore[type-var]


def of_all(noises: Sequence[NoiseModel], runs: Sequence[int]) -> NoiseModel:
    """The noise model of stacks laid end to end, of so many runs each; nan where one has no value."""
    parts = [_by_run(noise) for noise in noises]
    whole = max(zip(noises, parts, strict=True), key=lambda pair: len(pair[1]))
    return replace(  # type: ignore[type-var]
        whole[0],
        **{
            name: np.concatenate([p.get(name, np.full(n, np.nan)) for p, n in zip(parts, runs, strict=True)])
            for name in whole[1]
        },
    )


def _by_run(noise: NoiseModel) -> dict[str, NDArray[Any]]:
    """Fields that differ from run to run: arrays with the runs along the last axis."""
    values = {f.name: getattr(noise, f.name) for f in fields(noise)}  # type: ignore[arg-type]
    return {n: v for n, v in values.items() if isinstance(v, np.ndarray) and (v.ndim == 1 or v.shape[-1] > 1)}


def response_floor(response: Array) -> float | Array:
    """Smallest mean a power is taken of, from the range of the responses; nan is absent."""
    absent = np.isnan(response)
    span = np.max(np.where(absent, -np.inf, response), axis=0) - np.min(
        np.where(absent, np.inf, response), axis=0
    )
    size = np.max(np.where(absent, 0.0, np.abs(response)), axis=0)
    floor = FLOOR_SHARE * np.where(span > 0, span, np.maximum(size, 1.0))
    return float(floor) if response.ndim == 1 else floor


def assumed_noise(of: str, exponent: float = 2.0) -> NoiseModel:
    """Noise model a protocol prescribes instead of estimating it.

    Parameters
    ----------
    of : {'response', 'concentration'}
        What the variance is a power of.
    exponent : float
        2 for a constant coefficient of variation, 1 for counting noise, 0 for uniform.

    Raises
    ------
    MethodError
        For another ``of`` or an exponent outside −1 to 4.
    """
    if not -1.0 <= exponent <= 4.0:
        raise MethodError(f"exponent {exponent!r} of an assumed noise model must lie between -1 and 4")
    if of == "response":
        return PowerOfMeanNoise(float(exponent))
    if of == "concentration":
        return PowerOfConcentrationNoise(float(exponent))
    raise MethodError(f"noise can be assumed of 'response' or 'concentration', not of {of!r}")


def given_noise(u: ArrayLike | None, relative_sd: ArrayLike | None, count: int) -> GivenNoise | None:
    """Noise from standard deviations handed in, or None.

    Raises
    ------
    InputError
        When both are given, the length differs, or a value is not positive.
    """
    if u is not None and relative_sd is not None:
        raise InputError("give u (known) or relative_sd (up to a factor), not both")
    values = u if u is not None else relative_sd
    if values is None:
        return None
    name = "u" if u is not None else "relative_sd"
    sd = np.broadcast_to(np.asarray(values, dtype=np.float64), (count,)) if np.ndim(values) == 0 else values
    sd = np.asarray(sd, dtype=np.float64)
    if sd.shape != (count,):
        raise InputError(f"{name} has shape {sd.shape} for {count} standards; give one each")
    bad = np.flatnonzero(~(np.isfinite(sd) & (sd > 0)))
    if bad.size:
        raise InputError(f"{name}[{bad[0]}] = {sd[bad[0]]} must be finite and above 0")
    return GivenNoise(tuple(float(s) for s in sd), known=u is not None)


def noise_from_dict(record: Mapping[str, Any]) -> NoiseModel:
    """Read back what `NoiseModel.to_dict` wrote.

    Raises
    ------
    MethodError
        For an unknown kind.
    """
    fields = {k: v for k, v in record.items() if k != "kind"}
    match record.get("kind"):
        case "uniform":
            return UniformNoise()
        case "power-of-mean":
            return PowerOfMeanNoise(**fields)
        case "additive-relative":
            return AdditiveRelativeNoise(**fields)
        case "power-of-concentration":
            return PowerOfConcentrationNoise(**fields)
        case "given":
            return GivenNoise(tuple(fields["sd"]), fields["known"], tuple(fields["mean"]))
        case "history":
            from calib.curves.history_noise import history_noise_from

            return history_noise_from(fields)
        case kind:
            raise MethodError(f"unknown noise model {kind!r}")
