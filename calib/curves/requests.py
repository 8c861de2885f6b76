"""What a caller asks of a fit: noise model, fixed values, bounds and starts, checked."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from calib.curves.noise import GivenNoise, NoiseModel, PowerOfMeanNoise, UniformNoise
from calib.curves.solver import Problem
from calib.curves.standards import Standards
from calib.curves.variance_function import ESTIMATED
from calib.errors import MethodError, ModelError
from calib.models import ResponseModel

Array = NDArray[np.float64]
Bounds = Mapping[str, tuple[float, float]]

NOISE_NAMES = ("uniform", "relative", *ESTIMATED)


def requested_noise(noise: str | NoiseModel, given: GivenNoise | None) -> str | NoiseModel:
    """Noise model asked for; a name stays a name where it is to be estimated."""
    if given is not None:
        if noise != "uniform":
            raise MethodError("u and relative_sd replace the noise model; leave noise at 'uniform'")
        return given
    if isinstance(noise, NoiseModel):
        return noise
    if noise == "uniform":
        return UniformNoise()
    if noise == "relative":
        return PowerOfMeanNoise(2.0)
    if noise in ESTIMATED:
        return noise
    if noise == "history":
        raise MethodError(
            "noise = 'history' is known to a method alone, whose runs are in a store; here make the model with "
            "calib.pool_noise(curves of past runs) and give that"
        )
    raise MethodError(f"unknown noise model {noise!r}; known are {', '.join(NOISE_NAMES)}")


def problem_of(
    model: ResponseModel,
    standards: Standards,
    fixed: Mapping[str, float],
    bounds: Bounds,
    start: Mapping[str, float],
) -> Problem:
    """Model, fixed values and bounds of a fit, checked against the model's parameters."""
    for what, names in (("fixed", fixed), ("bounds", bounds), ("start", start)):
        unknown = set(names) - set(model.names)
        if unknown:
            raise ModelError(
                f"{what} names {sorted(unknown)[0]!r}, which model '{model.name}' does not have; "
                f"its parameters are {', '.join(model.names)}"
            )
    _refuse_start(model, start)
    held = {n: v for n, v in model.fixed_by_default.items() if n not in bounds and n not in start} | dict(
        fixed
    )
    free = np.array([n not in held for n in model.names])
    if not free.any():
        raise ModelError(f"all parameters of model '{model.name}' are fixed; leave at least one free")
    template = np.array([float(held.get(n, np.nan)) for n in model.names])
    if not np.all(np.isfinite(template[~free])):
        raise ModelError("a fixed parameter must have a finite value")
    lower, upper = _bounds(model, standards, bounds)
    outside = ~free & ((template < lower) | (template > upper)) & model.positive
    if outside.any():
        i = int(np.argmax(outside))
        raise ModelError(
            f"fixed {model.names[i]} = {template[i]:g} lies outside [{lower[i]:g}, {upper[i]:g}], what the model allows"
        )
    return Problem(
        model=model,
        x=standards.concentration,
        y=standards.response,
        root_weight=np.ones(standards.response.size),
        template=template,
        free=free,
        lower=lower,
        upper=upper,
        given_bounds=np.array([n in bounds for n in model.names]),
    )


def _refuse_start(model: ResponseModel, start: Mapping[str, float]) -> None:
    for name, value in start.items():
        if not np.isfinite(value):
            raise ModelError(f"start of {name} = {value} must be finite; give a rough value or leave it out")
        if model.parameters[model.index(name)].positive and value <= 0:
            raise ModelError(f"start of {name} = {value:g} must be above 0 in model '{model.name}'")


def _bounds(model: ResponseModel, standards: Standards, bounds: Bounds) -> tuple[Array, Array]:
    lower, upper = model.bounds(standards.concentration)
    for name, (low, high) in bounds.items():
        if not low < high:
            raise ModelError(
                f"bounds of {name} must be (lower, upper) with lower < upper, got ({low}, {high})"
            )
        i = model.index(name)
        if model.parameters[i].positive and high <= 0:
            raise ModelError(f"bounds of {name} must allow values above 0, got ({low}, {high})")
        lower[i], upper[i] = (max(low, 0.0) if model.parameters[i].positive else low), high
    return lower, upper
