"""Intervals by propagating distributions (JCGM 101:2008, from memory).

A draw takes the curve's parameters from a scaled and shifted t distribution about the
estimates (6.4.9 there) and the mean response of the unknown from another with the *same*
scale, because one residual standard deviation stands behind both; then it reads one off the
other. Positive parameters are drawn in their logarithm. The noise is that of the candidate:
a drawn mean response η explains the reading y with noise of variance scale²·G(η)/m. A draw
whose curve never reaches its response counts as 0 or infinite when the draws are ranked; none
is dropped, for those are the draws that say an end is open.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.chance import seeded
from calib.curves.curve import Curve
from calib.errors import InputError
from calib.quantification.axis import Axis
from calib.quantification.budget import Component, FurtherUncertainty

Array = NDArray[np.float64]

TRIALS = 200_000
# JCGM 101, 7.2.2 asks for 1e4/(1 - p), the default at 95 %; fewer than this leave too few to rank.
FEWEST = 100_000
# Points of the axis at which the noise of a candidate is tabulated.
TABLE = 4001
HALVINGS = 50
# Logarithms beyond these are beyond any concentration; their exponentials are still finite.
FARTHEST = 300.0


@dataclass(frozen=True, slots=True)
class Draws:
    """M draws of all that is uncertain, shared by the unknowns of a batch.

    Sharing them makes the limits of one unknown independent of those it is read with.

    Attributes
    ----------
    parameters : (k, M) array
    first, last : (M,) arrays
        Response of each drawn curve at the ends of the axis.
    noise : (M,) array
        Noise of one reading over the root of G.
    stretch : (M,) array
        Sum of the relative deviations of the further components.
    """

    parameters: Array
    first: Array
    last: Array
    noise: Array
    stretch: Array


def drawn_limits(
    axis: Axis,
    y: Array,
    replicates: Array,
    confidence: float,
    components: Sequence[FurtherUncertainty],
    trials: int,
    seed: int,
) -> tuple[Array, Array]:
    """Probabilistically symmetric limits of unknowns (m,); one unknown at a time in memory.

    An open end is ``axis.open_low`` or infinite.

    Raises
    ------
    InputError
        For too few trials or a seed that is none.
    """
    if trials < FEWEST:
        raise InputError(f"trials = {trials} are too few to rank; use at least {FEWEST}")
    generator = seeded(seed)
    if not axis.curve.coverage_freedom > 0:
        return np.full(y.size, axis.open_low), np.full(y.size, np.inf)
    draws = _drawn(axis, components, trials, generator)
    limits = np.array([_limits(axis, draws, *each, confidence) for each in zip(y, replicates, strict=True)])
    return limits[:, 0], limits[:, 1]


def _drawn(
    axis: Axis, components: Sequence[FurtherUncertainty], trials: int, generator: np.random.Generator
) -> Draws:
    curve = axis.curve
    nu = curve.coverage_freedom
    spread = np.sqrt(nu / generator.chisquare(nu, trials)) if np.isfinite(nu) else np.ones(trials)
    parameters = _parameters(curve, curve.covariance, spread, generator)
    noise = curve.scale * spread * generator.standard_normal(trials)
    stretch = np.zeros(trials)
    for c in components:
        covariance = c.parameter_covariance(curve)
        if covariance is not None:
            factor = _parameters(
                curve, covariance, _scale(c.degrees_of_freedom, trials, generator), generator
            )
            parameters = _both(curve, parameters, factor)
        elif isinstance(c, Component):
            stretch += _relative_deviations(c, trials, generator)
    low, high = axis.concentration(np.array([axis.low, axis.high]))
    return Draws(
        parameters,
        curve.response_model.response(np.full(trials, low), list(parameters)),
        curve.response_model.response(np.full(trials, high), list(parameters)),
        noise,
        stretch,
    )


def _relative_deviations(component: Component, trials: int, generator: np.random.Generator) -> Array:
    """Draws of a relative component; of a difference of variances the larger one is what is uncertain."""
    z = generator.standard_normal(trials)
    taken_off = component.estimated**2 - component.relative_u**2
    drawn = (component.estimated * _scale(component.degrees_of_freedom, trials, generator)) ** 2
    return np.asarray(np.sqrt(np.maximum(drawn - taken_off, 0.0)) * z)


def _scale(degrees_of_freedom: float, trials: int, generator: np.random.Generator) -> Array:
    """Draws of a standard deviation over its estimate."""
    if np.isinf(degrees_of_freedom):
        return np.ones(trials)
    return np.asarray(np.sqrt(degrees_of_freedom / generator.chisquare(degrees_of_freedom, trials)))


def _both(curve: Curve, parameters: Array, others: Array) -> Array:
    """Parameters with the deviations of two independent draws; positive ones add in their logarithm."""
    centre = curve.values[:, None]
    positive = curve.response_model.positive[:, None]
    with np.errstate(divide="ignore", invalid="ignore"):
        product = parameters * np.where(positive, others / centre, 1.0)
    return np.where(positive, product, parameters + others - centre)


def _parameters(curve: Curve, covariance: Array, spread: Array, generator: np.random.Generator) -> Array:
    """Parameters (k, M): estimates plus spread·V^½·z, positive ones in their logarithm."""
    free = curve.free
    logarithmic = curve.response_model.positive[free]
    p = curve.values[free]
    chain = np.where(logarithmic, p, 1.0)
    root = _root(covariance[np.ix_(free, free)] / np.outer(chain, chain))
    z = generator.standard_normal((p.size, spread.size))
    drawn = np.where(logarithmic, np.log(np.where(logarithmic, p, 1.0)), p)[:, None] + spread * (root @ z)
    drawn[logarithmic] = np.exp(np.clip(drawn[logarithmic], -FARTHEST, FARTHEST))
    parameters = np.repeat(curve.values[:, None], spread.size, axis=1)
    parameters[free] = drawn
    return parameters


def _root(covariance: Array) -> Array:
    """A square root of a covariance that may be singular, safe in any unit."""
    sd = np.sqrt(np.diag(covariance))
    scale = np.where(sd > 0, sd, 1.0)
    values, vectors = np.linalg.eigh(covariance / np.outer(scale, scale))
    return np.asarray(scale[:, None] * vectors * np.sqrt(np.maximum(values, 0.0)))


def _limits(axis: Axis, draws: Draws, y: float, replicates: float, confidence: float) -> tuple[float, float]:
    """The draws between which the central share lies (JCGM 101, 7.7)."""
    response = _candidates(axis, y, draws.noise / np.sqrt(replicates))
    x = _read(axis, draws, response)
    if draws.stretch.any():
        x = _stretched(axis, x, draws.stretch)
    inside = int(confidence * x.size + 0.5)
    low = max((x.size - inside + 1) // 2 - 1, 0)
    high = min(low + inside, x.size - 1)
    ranked = np.partition(x, (low, high))
    return float(ranked[low]), float(ranked[high])


def _candidates(axis: Axis, y: float, noise: Array) -> Array:
    """Mean responses η with η + noise·√G(η) = y.

    G is tabulated along the axis, as far out from y as candidates go on drifting away from it, and
    taken as constant beyond the curve's ends.
    """
    x = axis.concentration(np.linspace(axis.low, axis.high, TABLE))
    mean = axis.curve.predict(x)
    root = np.sqrt(axis.curve.noise.variance(mean, x))
    distance = axis.direction * (mean - y) / root
    rising = np.maximum.accumulate(np.maximum(distance, 0.0))
    falling = np.minimum.accumulate(np.minimum(distance, 0.0)[::-1])[::-1]
    wanted = -axis.direction * noise
    distance = rising + falling
    beyond = np.where(wanted > distance[-1], root[-1], root[0]) * axis.direction * wanted + y
    outside = (wanted < distance[0]) | (wanted > distance[-1])
    return np.where(outside, beyond, np.interp(wanted, distance, mean))


def _read(axis: Axis, draws: Draws, response: Array) -> Array:
    """Concentration of each response on its own curve; open ends where it is never reached."""
    direction = np.where(draws.last == draws.first, axis.direction, np.sign(draws.last - draws.first))
    below = direction * (response - draws.first) <= 0
    above = ~below & (direction * (response - draws.last) >= 0)
    if axis.logarithmic:
        x = axis.curve.response_model.inverse(response, list(draws.parameters))
    else:
        x = _bisected(axis, draws.parameters, response, direction)
    return np.where(below, axis.open_low, np.where(above, np.inf, x))


def _bisected(axis: Axis, parameters: Array, response: Array, direction: Array) -> Array:
    """Root between the ends of the axis, for any formula that takes arrays of parameters."""
    low, high = np.full(response.size, axis.low), np.full(response.size, axis.high)
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        fitted = axis.curve.response_model.response(axis.concentration(middle), list(parameters))
        short = direction * (response - fitted) > 0
        low, high = np.where(short, middle, low), np.where(short, high, middle)
    return axis.concentration(0.5 * (low + high))


def _stretched(axis: Axis, x: Array, stretch: Array) -> Array:
    """Concentrations with the relative deviations, which add in ln x, or on the plain axis in x."""
    factor = np.exp(stretch) if axis.logarithmic else 1.0 + stretch
    return np.where(np.isfinite(x), x * factor, x)
