"""Many runs fitted at once: a year of runs, or a hundred thousand simulations."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.assemble import Fitted, curve_from, unfitted_curve
from calib.curves.curve import Curve
from calib.curves.diagnostics import Finding
from calib.curves.estimate_noise import solve_estimating_noise
from calib.curves.fit import fit, weighted_problem
from calib.curves.levels import Levels, collapsed, uncollapsed
from calib.curves.noise import GivenNoise, NoiseModel, UniformNoise, given_noise, of_all, of_run, of_runs
from calib.curves.requests import Bounds, problem_of, requested_noise
from calib.curves.reweight import Settled, solve_with_noise
from calib.curves.search import on_bound
from calib.curves.solver import Problem, Solution, stack_of_one
from calib.curves.stack_covariance import inverses
from calib.curves.stack_input import NOT_FINITE, OK, arrays, per_run, statuses
from calib.curves.stack_problem import Stack
from calib.curves.standards import Standards, frozen
from calib.models import CustomModel, ResponseModel, response_model

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

# So many runs are fitted at once: what a fit needs besides its result stays flat.
PART = 8192


# Arrays of a stack with one entry a run.
BY_RUN = (
    "parameters", "covariance", "residual_sum", "degrees_of_freedom", "converged", "at_bound", "_stable", "_tangent",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class CurveStack(Sequence[Curve]):
    """Result of `fit_stack`; ``stack[i]`` is the `Curve` of run i.

    Attributes
    ----------
    parameter_names : tuple of str
    parameters : (runs, k) array
        nan where a run could not be fitted.
    covariance : (runs, k, k) array
        Zero for fixed parameters; nan without residual degrees of freedom.
    residual_sum : (runs,) array
        Weighted sum of squared residuals.
    degrees_of_freedom : (runs,) int array
    converged : (runs,) bool array
    at_bound : (runs,) bool array
        A parameter sits on a bound: where nobody asked for the bound, the best curve lies at
        infinity and the parameters mean nothing.
    status : tuple of str
        'ok', 'too-few-levels' or 'not-finite' for each run.
    """

    parameter_names: tuple[str, ...]
    parameters: Array
    covariance: Array
    residual_sum: Array
    degrees_of_freedom: NDArray[np.intp]
    converged: Mask
    at_bound: Mask
    status: tuple[str, ...]
    _problem: Problem
    _requested: str | NoiseModel
    _noise: NoiseModel
    _concentration: Array
    _response: Array
    _stable: Mask
    _tangent: Array
    _second: Mapping[int, Array]
    _curves: Mapping[int, Curve]

    @property
    def residual_sd(self) -> Array:
        """Square root of residual_sum over degrees of freedom (runs,); nan without any."""
        nu = self.degrees_of_freedom
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(nu > 0, np.sqrt(self.residual_sum / nu), np.nan)

    def __len__(self) -> int:
        return int(self.parameters.shape[0])

    def __getitem__(self, i: int) -> Curve:  # type: ignore[override]
        if not -len(self) <= i < len(self):
            raise IndexError(f"run {i} of a stack of {len(self)}")
        i %= len(self)
        if i in self._curves:
            return self._curves[i]
        standards = self._standards(i)
        problem = replace(
            self._problem,
            x=standards.concentration,
            y=standards.response,
            root_weight=np.ones(standards.response.size),
        )
        if self.status[i] == NOT_FINITE:
            finding = Finding(
                NOT_FINITE,
                "a response of this run is infinite or beyond what can be computed; leave it out (nan) or correct it",
            )
            return unfitted_curve(problem, standards, self._requested, "least-squares", finding)
        if self.status[i] != OK:
            return unfitted_curve(problem, standards, self._requested, "least-squares")
        return self._curve(i, problem, standards)

    def _standards(self, i: int) -> Standards:
        y = self._response[:, i]
        present = np.isfinite(y)
        x = self._concentration if self._concentration.ndim == 1 else self._concentration[:, i]
        return Standards(frozen(x[present]), frozen(y[present]))

    def _curve(self, i: int, problem: Problem, standards: Standards) -> Curve:
        noise = self._noise
        if isinstance(noise, GivenNoise):
            noise = replace(noise, sd=tuple(np.asarray(noise.sd)[np.isfinite(self._response[:, i])]))
        noise = of_run(noise, i).bound_to(standards.response)
        parameters = self.parameters[i]
        total = float(self.residual_sum[i])
        offset = float(self._tangent[i] / np.sqrt(total)) if total > 0 else 0.0
        solution = Solution(parameters, total, bool(self.converged[i]), offset)
        weighted = weighted_problem(problem, noise, problem.model.response(problem.x, parameters))
        fitted = Fitted(solution, noise, weighted, bool(self._stable[i]), self._second.get(i))
        return curve_from(fitted, standards, "least-squares")


def fit_stack(
    concentration: ArrayLike,
    response: ArrayLike,
    model: str | ResponseModel = "4PL",
    *,
    noise: str | NoiseModel = "uniform",
    u: ArrayLike | None = None,
    relative_sd: ArrayLike | None = None,
    fixed: Mapping[str, float] | None = None,
    bounds: Bounds | None = None,
    start: Mapping[str, ArrayLike] | None = None,
) -> CurveStack:
    """Fit the same model to many runs at once.

    Parameters
    ----------
    concentration : (n,) or (runs, n) array
        Levels, shared by all runs or given for each.
    response : (runs, n) array
        nan marks an absent reading.
    model, noise, u, relative_sd, fixed, bounds
        As in `calib.fit`; ``u`` and ``relative_sd`` are (n,), shared by all runs.
    start : mapping, optional
        Start values by name, one number or one for each run.

    Returns
    -------
    CurveStack
        A run that cannot be fitted has its status and finding, and leaves the others alone.

    Raises
    ------
    InputError, ModelError, MethodError
        For input that cannot be used at all.

    Examples
    --------
    >>> import numpy as np, calib
    >>> x = np.array([1.0, 2.0, 4.0, 8.0, 16.0])
    >>> runs = np.array([[10, 18, 30, 45, 58], [11, 19, 32, 47, 61]])
    >>> stack = calib.fit_stack(x, runs, model="saturation", fixed={"offset": 0.0})
    >>> len(stack), bool(stack.converged.all())
    (2, True)
    """
    chosen = response_model(model)
    x, y = arrays(concentration, response, chosen)
    requested = requested_noise(noise, given_noise(u, relative_sd, y.shape[0]))
    template = Standards(x.max(axis=1) if x.ndim == 2 else x, np.zeros(x.shape[0]))
    starts = {name: per_run(name, values, y.shape[1]) for name, values in (start or {}).items()}
    scalar = {name: float(values[0]) for name, values in starts.items()}
    problem = problem_of(chosen, template, fixed or {}, bounds or {}, scalar)

    def part(of: slice) -> CurveStack:
        own, begin = (x if x.ndim == 1 else x[:, of]), {n: v[of] for n, v in starts.items()}
        return _fitted(problem, own, np.ascontiguousarray(y[:, of]), requested, fixed, bounds, begin)

    parts = [slice(i, min(i + PART, y.shape[1])) for i in range(0, y.shape[1], PART)]
    return part(parts[0]) if len(parts) == 1 else _joined(map(part, parts), parts, x, y)


def _fitted(
    problem: Problem,
    x: Array,
    y: Array,
    requested: str | NoiseModel,
    fixed: Mapping[str, float] | None,
    bounds: Bounds | None,
    starts: Mapping[str, Array],
) -> CurveStack:
    """Fit checked runs (n, R), all at once."""
    status = statuses(x, y, int(problem.free.sum()))
    usable = np.flatnonzero([s == OK for s in status])
    if isinstance(problem.model, CustomModel) or not usable.size:
        return _one_by_one(problem, x, y, requested, usable, status, fixed, bounds, starts)
    kept = y if usable.size == y.shape[1] else y.take(usable, axis=1)
    own = x if x.ndim == 1 else x.take(usable, axis=1)
    levels = _levels(own, kept, requested)
    stack = stack_of_one(problem)
    if x.ndim == 2:
        stack = _own_bounds(stack, problem, own)
    given = {
        problem.model.index(n): v[usable] for n, v in starts.items() if problem.free[problem.model.index(n)]
    }
    begin = _starts(problem, given, usable.size)
    if isinstance(requested, str):
        estimated = solve_estimating_noise(problem, stack, levels, requested, begin)
        settled, bound = estimated.settled, estimated.noise
        place = np.zeros(y.shape[1], dtype=np.intp)
        place[usable] = np.arange(usable.size)
        used = of_runs(bound, place)
    else:
        used, bound = requested, _bound(requested, own, kept)
        settled = solve_with_noise(stack, levels, bound, begin)
    return _assembled(problem, stack, requested, used, x, y, levels, bound, settled, usable, status)


def _joined(stacks: Iterable[CurveStack], parts: Sequence[slice], x: Array, y: Array) -> CurveStack:
    """The stacks of consecutive runs as one; each is let go as soon as it is copied."""
    runs = y.shape[1]
    joined: dict[str, Any] = {}
    status: list[str] = []
    noises: list[NoiseModel] = []
    second: dict[int, Array] = {}
    curves: dict[int, Curve] = {}
    for of, stack in zip(parts, stacks, strict=True):
        for name in BY_RUN:
            values = getattr(stack, name)
            into = joined.setdefault(name, np.empty((runs, *values.shape[1:]), values.dtype))
            into[of] = values
        status.extend(stack.status)
        noises.append(stack._noise)
        second.update({of.start + i: p for i, p in stack._second.items()})
        curves.update({of.start + i: c for i, c in stack._curves.items()})
    sizes = [of.stop - of.start for of in parts]
    return replace(
        stack,
        **joined,
        status=tuple(status),
        _noise=of_all(noises, sizes),
        _concentration=x,
        _response=y,
        _second=second,
        _curves=curves,
    )


def _levels(x: Array, y: Array, noise: str | NoiseModel) -> Levels:
    # Standard deviations given reading by reading forbid collapsing.
    alike = x.ndim == 1 and not isinstance(noise, GivenNoise)
    return collapsed(x, y) if alike else uncollapsed(x, y)


def _bound(noise: NoiseModel, x: Array, y: Array) -> NoiseModel:
    """The noise model with what it needs of the runs, in the order of their levels."""
    if not isinstance(noise, GivenNoise):
        return noise.bound_to(y)
    sd = np.asarray(noise.sd)[np.argsort(x, axis=0, kind="stable")]
    return replace(noise, sd=sd if sd.ndim == 2 else sd[:, None])


def _own_bounds(stack: Stack, problem: Problem, x: Array) -> Stack:
    """Sanity bounds follow each run's own concentrations; requested ones hold for all."""
    pairs = [problem.model.bounds(x[:, i]) for i in range(x.shape[1])]
    lower, upper = (np.stack([p[k] for p in pairs], axis=1) for k in (0, 1))
    asked = problem.given_bounds[:, None]
    return replace(
        stack,
        lower=np.where(asked, problem.lower[:, None], lower),
        upper=np.where(asked, problem.upper[:, None], upper),
    )


def _starts(problem: Problem, given: dict[int, Array], runs: int) -> Array | dict[int, Array]:
    if len(given) < int(problem.free.sum()):
        return given
    starts = np.repeat(problem.template[:, None], runs, axis=1)
    for i, values in given.items():
        starts[i] = values
    return starts


def _assembled(
    problem: Problem,
    stack: Stack,
    requested: str | NoiseModel,
    noise: NoiseModel,
    x: Array,
    y: Array,
    levels: Levels,
    bound: NoiseModel,
    settled: Settled,
    usable: NDArray[np.intp],
    status: tuple[str, ...],
) -> CurveStack:
    found = settled.found
    runs, free = y.shape[1], int(problem.free.sum())
    nu = np.maximum(np.isfinite(y).sum(axis=0) - free, 0)
    inverse = inverses(problem, levels, bound, found)
    scale, _ = bound.scale(found.total, nu[usable])
    inverse *= scale[:, None, None] ** 2
    fixed = np.where(problem.free, np.nan, problem.template)
    parameters = _among(found.parameters.T, usable, np.broadcast_to(fixed, (runs, fixed.size)))
    covariance = _among(inverse, usable, np.full((runs, *inverse.shape[1:]), np.nan))
    total = _among(found.total, usable, np.full(runs, np.nan))
    tangent = _among(found.tangent, usable, np.full(runs, np.nan))
    never = np.zeros(runs, dtype=bool)
    converged = _among(found.converged & settled.stable, usable, never)
    stable = _among(settled.stable, usable, never)
    at_bound = _among(on_bound(stack, found.parameters), usable, never)
    second = {int(usable[i]): p for i, p in found.second.items()}
    return CurveStack(
        problem.model.names, parameters, covariance, total, nu, converged, at_bound, status,
        problem, requested, noise, x, y, stable, tangent, second, {},
    )  # fmt: skip


def _among(values: NDArray[Any], usable: NDArray[np.intp], others: NDArray[Any]) -> NDArray[Any]:
    """Values (usable runs, ...) in their places among all runs."""
    if usable.size == others.shape[0]:
        return values
    filled = np.array(others)
    filled[usable] = values
    return filled


def _one_by_one(
    problem: Problem,
    x: Array,
    y: Array,
    requested: str | NoiseModel,
    usable: NDArray[np.intp],
    status: tuple[str, ...],
    fixed: Mapping[str, float] | None,
    bounds: Bounds | None,
    starts: Mapping[str, Array],
) -> CurveStack:
    """Formulas of the user are fitted run by run: they may not take the parameters of many runs at once."""
    runs, k = y.shape[1], problem.free.size
    curves: dict[int, Curve] = {}
    for i in usable:
        present = np.isfinite(y[:, i])
        noise = requested
        if isinstance(noise, GivenNoise):
            noise = replace(noise, sd=tuple(np.asarray(noise.sd)[present]))
        curves[int(i)] = fit(
            (x if x.ndim == 1 else x[:, i])[present],
            y[present, i],
            problem.model,
            noise=noise,
            fixed=fixed,
            bounds=bounds,
            start={n: float(v[i]) for n, v in starts.items()},
        )
    parameters, covariance = np.full((runs, k), np.nan), np.full((runs, k, k), np.nan)
    total, tangent = np.full(runs, np.nan), np.full(runs, np.nan)
    converged, at_bound = np.zeros(runs, dtype=bool), np.zeros(runs, dtype=bool)
    nu = np.maximum(np.isfinite(y).sum(axis=0) - int(problem.free.sum()), 0)
    for i, curve in curves.items():
        parameters[i], covariance[i], total[i] = curve.values, curve.covariance, curve.residual_sum
        converged[i] = curve.converged
        at_bound[i] = not bool(np.all(curve.determined))
    return CurveStack(
        problem.model.names, parameters, covariance, total, nu, converged, at_bound, status,
        problem, requested, UniformNoise(), x, y, converged, tangent, {}, curves,
    )  # fmt: skip
