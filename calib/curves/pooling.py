"""A noise model pooled over the runs of a history.

One run cannot tell how its noise grows with the response: the exponent of a power scatters by
0.16 between runs of 16 readings, and intervals then cover 89 to 95 % where 95 % is claimed. The
residuals of twenty runs together leave a scatter of 0.03.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.curve import Curve
from calib.curves.history_noise import HistoryNoise
from calib.curves.moderated_variance import moderated_variance
from calib.curves.noise import AdditiveRelativeNoise, NoiseModel, PowerOfMeanNoise
from calib.curves.refit import own_start, requested_bounds
from calib.curves.stack import CurveStack, fit_stack
from calib.curves.variance_function import ESTIMATED, estimate_variance_function, pseudo_likelihood
from calib.errors import InputError

Array = NDArray[np.float64]

MOST_RUNS = 50
# Noise between constant and relative, as most instruments have: where the first fit starts.
FIRST_GUESS = PowerOfMeanNoise(1.4)
# Variance function and curves follow each other until the weights change by less than a share,
# which moves no concentration by a hundredth of its uncertainty, or so many times.
ROUNDS, SETTLED = 4, 0.01


def pool_noise(curves: Sequence[Curve]) -> HistoryNoise:
    """Noise model of past runs: what `calib.fit(..., noise=...)` takes for the next one.

    Every run is refitted with weights at its own fitted means; the variance function is the
    power-of-mean or the additive-relative one that minimises the pseudo-likelihood of all
    residuals together, corrected for leverage, and of the two families the one with the
    smaller value (Davidian and Giltinan, Nonlinear Models for Repeated Measurement Data, 1995,
    ch. 2 and 5, from memory). The residual variances of the runs give the moderated variance.

    Parameters
    ----------
    curves : sequence of Curve
        Accepted runs of one method and instrument in the order they were measured, responses in one
        unit. The last 50 that converged and scatter are used. Curves fitted with a model made of fewer
        than 5 runs carry the finding 'variance-from-few-runs'.

    Returns
    -------
    HistoryNoise

    Raises
    ------
    InputError
        When no curve can be used.

    Examples
    --------
    >>> import numpy as np, calib
    >>> x = np.repeat([1.0, 2.0, 4.0, 8.0, 16.0], 2)
    >>> y = 100 * x / (8 + x) * (1 + 0.02 * np.random.default_rng(1).standard_normal((20, 10)))
    >>> noise = calib.pool_noise(calib.fit_stack(x, y, model="saturation", fixed={"offset": 0.0}))
    >>> noise.runs, noise.family
    (20, 'power-of-mean')
    """
    usable = [c for c in curves if _usable(c)][-MOST_RUNS:]
    if not usable:
        raise InputError(
            f"none of {len(curves)} curves can be pooled: each must have converged, with more readings than free "
            "parameters, some scatter, and one concentration a reading; give accepted runs"
        )
    groups = _groups(usable)
    first = _refitted(groups, FIRST_GUESS)
    best, other = sorted((_estimated(groups, first, f) for f in ESTIMATED), key=lambda r: r.value)
    return HistoryNoise(
        function=best.function,
        spread=moderated_variance(best.residuals.variance, best.residuals.degrees_of_freedom),
        runs=best.residuals.variance.size,
        readings=best.residuals.residual.size,
        difference=other.value - best.value,
    )


def _usable(curve: Curve) -> bool:
    return (
        curve.converged
        and curve.degrees_of_freedom > 0
        and curve.standards.concentration.ndim == 1
        and all(f.code != "no-scatter" for f in curve.findings)
    )


@dataclass(frozen=True, slots=True)
class _Group:
    """Runs of one model under the same settings, in one stack.

    ``x`` and ``y`` are (runs, n); a shorter run is filled up with absent readings at a level it has.
    """

    example: Curve
    x: Array
    y: Array
    start: dict[str, Array]

    def fitted(self, noise: NoiseModel, start: dict[str, Array]) -> CurveStack:
        """Refit every run under one noise model."""
        example = self.example
        shared = bool(np.all(self.x == self.x[0]))
        return fit_stack(
            self.x[0] if shared else self.x,
            self.y,
            example.response_model,
            noise=noise,
            fixed=example.fixed,
            bounds=requested_bounds(example),
            start=start,
        )


def _groups(curves: Sequence[Curve]) -> list[_Group]:
    alike: dict[object, list[Curve]] = {}
    for curve in curves:
        settings = (*sorted(curve.fixed.items()), *sorted(requested_bounds(curve).items()))
        alike.setdefault((id(curve.response_model), settings), []).append(curve)
    return [_group(members) for members in alike.values()]


def _group(curves: Sequence[Curve]) -> _Group:
    longest = max(c.standards.response.size for c in curves)
    x, y = np.empty((len(curves), longest)), np.full((len(curves), longest), np.nan)
    for i, curve in enumerate(curves):
        n = curve.standards.response.size
        x[i] = curve.standards.concentration[0]
        x[i, :n], y[i, :n] = curve.standards.concentration, curve.standards.response
    starts = [own_start(c) for c in curves]
    return _Group(curves[0], x, y, {name: np.array([s[name] for s in starts]) for name in starts[0]})


@dataclass(frozen=True, slots=True)
class _Residuals:
    """Residuals of all runs under one noise model.

    ``residual``, ``mean`` and ``leverage`` are (N,), of all readings; ``variance`` and
    ``degrees_of_freedom`` are (K,), of the runs; ``stacks`` are the fits they come from.
    """

    residual: Array
    mean: Array
    leverage: Array
    variance: Array
    degrees_of_freedom: Array
    stacks: tuple[CurveStack, ...]


def _refitted(
    groups: Sequence[_Group], noise: NoiseModel, before: Sequence[CurveStack] | None = None
) -> _Residuals:
    """Fit every run under a noise model, from where an earlier fit ended."""
    starts = (
        [g.start for g in groups]
        if before is None
        else [_ends(s, g) for s, g in zip(before, groups, strict=True)]
    )
    stacks = tuple(g.fitted(noise, start) for g, start in zip(groups, starts, strict=True))
    readings: list[tuple[Array, Array, Array]] = []
    runs: list[tuple[float, float]] = []
    for group, stack in zip(groups, stacks, strict=True):
        for i in np.flatnonzero(stack.converged & (stack.residual_sum > 0)):
            readings.append(_of_run(group, stack, noise, int(i)))
            runs.append((float(stack.residual_sd[i]) ** 2, float(stack.degrees_of_freedom[i])))
    if not runs:
        raise InputError("no run of the history could be fitted again under a common noise model")
    residual, mean, leverage = (np.concatenate(part) for part in zip(*readings, strict=True))
    variance, freedom = np.array(runs).T
    return _Residuals(residual, mean, leverage, variance, freedom, stacks)


def _ends(stack: CurveStack, group: _Group) -> dict[str, Array]:
    """Parameters of an earlier fit; where it failed, those of the curve itself."""
    ends = {}
    for name, start in group.start.items():
        values = stack.parameters[:, stack.parameter_names.index(name)]
        ends[name] = np.where(stack.converged, values, start)
    return ends


def _of_run(group: _Group, stack: CurveStack, noise: NoiseModel, i: int) -> tuple[Array, Array, Array]:
    """Residuals, fitted means and leverages of one run."""
    present = np.isfinite(group.y[i])
    x, y, p = group.x[i, present], group.y[i, present], stack.parameters[i]
    model = group.example.response_model
    mean = model.response(x, p)
    gradient = model.gradient(x, p)
    g = noise.bound_to(y).variance(mean, x)
    own = np.einsum("ni,ij,nj->n", gradient, stack.covariance[i], gradient)
    return y - mean, mean, own / (float(stack.residual_sd[i]) ** 2 * g)


@dataclass(frozen=True, slots=True)
class _Estimate:
    """A variance function of one family with its pseudo-likelihood and the residuals it leaves."""

    function: PowerOfMeanNoise | AdditiveRelativeNoise
    value: float
    residuals: _Residuals


def _estimated(groups: Sequence[_Group], first: _Residuals, family: str) -> _Estimate:
    """Alternate between the curves and the variance function of one family."""
    residuals, shape = first, np.zeros(1)
    for _ in range(ROUNDS):
        origin = f"pooled over {residuals.variance.size} runs"
        function = estimate_variance_function(
            family, residuals.residual, residuals.mean, residuals.leverage, origin
        )
        residuals = _refitted(groups, function, residuals.stacks)
        before, shape = shape, np.log(function.variance(first.mean, first.mean))
        if np.ptp(shape - before) < SETTLED:
            break
    value = pseudo_likelihood(function, residuals.residual, residuals.mean, residuals.leverage)
    assert isinstance(function, PowerOfMeanNoise | AdditiveRelativeNoise)
    return _Estimate(function, value, residuals)
