"""From standards to a curve."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import chdtrc

from calib.curves.curve import Curve
from calib.curves.diagnostics import Finding, Information, findings_of, information
from calib.curves.levels import collapsed, uncollapsed
from calib.curves.noise import (
    GivenNoise,
    NoiseModel,
    PowerOfMeanNoise,
    UniformNoise,
    given_noise,
)
from calib.curves.reweight import PASSES, SETTLED, solve_with_noise
from calib.curves.solver import SOLVERS, Problem, Solution, solve, stack_of_one
from calib.curves.standards import Standards, checked_standards, frozen
from calib.curves.variance_function import ESTIMATED, estimate_variance_function
from calib.errors import MethodError, ModelError
from calib.models import ResponseModel, response_model

Array = NDArray[np.float64]
Bounds = Mapping[str, tuple[float, float]]

NOISE_NAMES = ("uniform", "relative", *ESTIMATED)
# One honest run in a thousand contradicts its own standard uncertainties.
CONTRADICTED = 1e-3
ONE_RUN = "estimated from this run"


@dataclass(frozen=True, slots=True)
class Fitted:
    """A solution together with the noise model it belongs to.

    ``second`` holds the parameters of a second solution with nearly the same sum.
    """

    solution: Solution
    noise: NoiseModel
    problem: Problem
    stable: bool
    second: Array | None = None


def fit(
    concentration: ArrayLike,
    response: ArrayLike,
    model: str | ResponseModel = "4PL",
    *,
    noise: str | NoiseModel = "uniform",
    u: ArrayLike | None = None,
    relative_sd: ArrayLike | None = None,
    fixed: Mapping[str, float] | None = None,
    bounds: Bounds | None = None,
    start: Mapping[str, float] | None = None,
    solver: str = "least-squares",
) -> Curve:
    """Fit a response model to standards, directly and by weighted least squares.

    Parameters
    ----------
    concentration : (n,) array
        Levels of the standards; (n, q) for a custom model of several columns.
    response : (n,) array
    model : str or ResponseModel
    noise : str or NoiseModel
        'uniform', 'relative', 'power-of-mean' or 'additive-relative' (both estimated
        from this run), or a noise model such as `calib.assumed_noise` makes.
    u : (n,) array, optional
        Known standard uncertainties of the responses: the scale is not estimated.
    relative_sd : (n,) array, optional
        Standard deviations up to a common factor, which is estimated.
    fixed : mapping, optional
        Parameters to hold, by name.
    bounds : mapping, optional
        (lower, upper) by name.
    start : mapping, optional
        Start values by name; compulsory for custom models.
    solver : {'least-squares', 'simplex'}

    Returns
    -------
    Curve
        A fit that went badly is no exception: see `Curve.converged` and `Curve.findings`.

    Raises
    ------
    InputError, ModelError, MethodError
        For input that cannot be used, naming the index, value and remedy.

    Examples
    --------
    >>> import calib
    >>> curve = calib.fit([1, 2, 4, 8], [10, 18, 30, 45], model="saturation", fixed={"offset": 0.0})
    >>> curve.converged
    True
    """
    chosen = response_model(model)
    standards = checked_standards(concentration, response, chosen)
    given = given_noise(u, relative_sd, standards.response.size)
    requested = requested_noise(noise, given)
    problem = problem_of(chosen, standards, fixed or {}, bounds or {}, start or {})
    if standards.levels < int(problem.free.sum()):
        return unfitted_curve(problem, standards, requested, solver)
    if solver not in SOLVERS:
        raise ModelError(f"unknown solver '{solver}'; known are {', '.join(SOLVERS)}")
    if isinstance(requested, str):
        fitted = _fit_estimating_noise(problem, requested, start or {}, solver)
    else:
        fitted = _fit_with_noise(problem, requested.bound_to(problem.y), start or {}, solver)
    return curve_from(fitted, standards, solver)


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
            "noise = 'history' (pooled over past runs) is not available in this version; "
            f"use one of {', '.join(NOISE_NAMES)} or an assumed noise model"
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


def _given(problem: Problem, start: Mapping[str, float]) -> dict[int, Array]:
    """Start values by index of parameter."""
    return {
        problem.model.index(n): np.array([v])
        for n, v in start.items()
        if problem.free[problem.model.index(n)]
    }


def _starts(problem: Problem, start: Mapping[str, float]) -> list[Array]:
    """Starts for the solvers that take one run at a time: given ones, else the stack's solution."""
    given = _given(problem, start)
    if len(given) == int(problem.free.sum()) or not problem.separable:
        p = problem.template.copy()
        missing = [n for i, n in enumerate(problem.model.names) if problem.free[i] and i not in given]
        if missing:
            problem.model.start(problem.x, problem.y)  # a formula of the user refuses in words
        for i, value in given.items():
            p[i] = value[0]
        return [p]
    levels = collapsed(problem.x, problem.y[:, None])
    with np.errstate(all="ignore"):
        data = problem.model.start(levels.x, levels.mean)[:, 0]
    for i, value in given.items():
        data[i] = value[0]
    return [np.where(problem.free, data, problem.template)]


def _fit_with_noise(problem: Problem, noise: NoiseModel, start: Mapping[str, float], solver: str) -> Fitted:
    """Solve one run under a noise model that is bound to its responses."""
    if problem.separable and solver == "least-squares":
        return _fit_through_stack(problem, noise, start)
    starts = _starts(problem, start)
    if noise.follows_fit:
        first = solve(problem, starts, solver)
        return _follow(problem, noise, [first.parameters, *starts], solver)
    weighted = weighted_problem(problem, noise, problem.y)
    return Fitted(solve(weighted, starts, solver), noise, weighted, stable=True)


def _fit_through_stack(problem: Problem, noise: NoiseModel, start: Mapping[str, float]) -> Fitted:
    """One run is a stack of one."""
    stack = stack_of_one(problem)
    column = problem.y[:, None]
    # Standard deviations given reading by reading forbid collapsing.
    levels = uncollapsed(problem.x, column) if isinstance(noise, GivenNoise) else collapsed(problem.x, column)
    sorted_noise = _sorted(noise, problem.x)
    given = _given(problem, start)
    starts: Array | dict[int, Array] = given
    if len(given) == int(problem.free.sum()):
        starts = _full_start(problem, given)
    settled = solve_with_noise(stack, levels, sorted_noise, starts)
    found = settled.found
    parameters = found.parameters[:, 0]
    mean = problem.model.response(problem.x, parameters)
    weighted = weighted_problem(problem, noise, mean)
    offset = float(found.tangent[0] / np.sqrt(found.total[0])) if found.total[0] > 0 else 0.0
    solution = Solution(parameters, float(found.total[0]), bool(found.converged[0]), offset)
    return Fitted(solution, noise, weighted, bool(settled.stable[0]), found.second.get(0))


def _full_start(problem: Problem, given: Mapping[int, Array]) -> Array:
    """All start values as a column; fixed parameters keep their value."""
    p = problem.template.copy()
    for i, values in given.items():
        p[i] = values[0]
    return p[:, None]


def _sorted(noise: NoiseModel, x: Array) -> NoiseModel:
    """Given standard deviations in the order of the sorted readings, a column of the stack."""
    if not isinstance(noise, GivenNoise):
        return noise
    order = np.argsort(x, kind="stable")
    return replace(noise, sd=np.asarray(noise.sd)[order, None])


def _fit_estimating_noise(problem: Problem, family: str, start: Mapping[str, float], solver: str) -> Fitted:
    """Alternate between the curve and its variance function until both stand still."""
    noise: NoiseModel = PowerOfMeanNoise(1.4, ONE_RUN).bound_to(problem.y)
    fitted = _fit_with_noise(problem, noise, start, solver)
    for _ in range(PASSES):
        before = noise.variance(problem.y, problem.x)
        noise = _estimated(fitted, family)
        here = dict(zip(problem.model.names, fitted.solution.parameters.tolist(), strict=True))
        second = fitted.second
        fitted = replace(_fit_with_noise(problem, noise, here, solver), second=second)
        after = noise.variance(problem.y, problem.x)
        # Only the shape counts: a common factor is taken up by the scale.
        shape = np.log(after / before)
        if np.ptp(shape) < 1e-6:
            return fitted
    return replace(fitted, stable=False)


def _estimated(fitted: Fitted, family: str) -> NoiseModel:
    mean = fitted.problem.model.response(fitted.problem.x, fitted.solution.parameters)
    leverage = information(fitted.problem, fitted.solution.parameters).leverage
    return estimate_variance_function(family, fitted.problem.y - mean, mean, leverage, ONE_RUN)


def _follow(problem: Problem, noise: NoiseModel, starts: list[Array], solver: str) -> Fitted:
    """Refit with weights at the fitted means until the means stand still."""
    mean = problem.model.response(problem.x, starts[0])
    candidates = starts
    size = float(np.max(np.abs(problem.y))) or 1.0
    for _ in range(PASSES):
        weighted = weighted_problem(problem, noise, mean)
        solution = solve(weighted, candidates, solver)
        fitted = problem.model.response(problem.x, solution.parameters)
        moved = float(np.max(np.abs(fitted - mean)))
        mean, candidates = fitted, [solution.parameters]
        if not moved > SETTLED * size:
            return Fitted(solution, noise, weighted, stable=True)
    return Fitted(solution, noise, weighted, stable=False)


def weighted_problem(problem: Problem, noise: NoiseModel, mean: Array) -> Problem:
    """The same problem with weights at fitted means."""
    return replace(problem, root_weight=1.0 / np.sqrt(noise.at_standards(mean, problem.x)))


def curve_from(fitted: Fitted, standards: Standards, solver: str) -> Curve:
    """The frozen curve of one run."""
    problem, solution = fitted.problem, fitted.solution
    nu = standards.response.size - int(problem.free.sum())
    mean = problem.model.response(problem.x, solution.parameters)
    noise = fitted.noise.after_fit(mean)
    known = noise.known_scale
    scale = 1.0 if known else (float(np.sqrt(solution.weighted_sum / nu)) if nu > 0 else np.nan)
    info = information(problem, solution.parameters)
    findings = findings_of(problem, solution, info, 0.0 if np.isnan(scale) else scale, fitted.stable)
    return Curve(
        response_model=problem.model,
        values=frozen(solution.parameters),
        free=problem.free,
        lower=frozen(problem.lower),
        upper=frozen(problem.upper),
        covariance=frozen(_covariance(info, problem.free, scale)),
        noise=noise,
        standards=standards,
        residual_sum=solution.weighted_sum,
        degrees_of_freedom=nu,
        scale=scale,
        coverage_freedom=np.inf if known else float(nu),
        r_squared=_r_squared(problem, solution),
        determined=info.determined,
        aicc=_aicc(solution.weighted_sum, standards.response.size, int(problem.free.sum())),
        converged=solution.converged and fitted.stable,
        findings=(
            *findings,
            *_noise_findings(noise),
            *_contradicted(noise, solution.weighted_sum, nu),
            *_second_solution(fitted),
        ),
        solver=solver,
    )


def _covariance(info: Information, free: NDArray[np.bool_], scale: float) -> Array:
    covariance = info.inverse * scale**2
    covariance[~free, :] = 0.0
    covariance[:, ~free] = 0.0
    return covariance


def _noise_findings(noise: NoiseModel) -> tuple[Finding, ...]:
    if getattr(noise, "origin", "") != ONE_RUN:
        return ()
    return (
        Finding(
            "variance-from-one-run",
            "variance function from 1 run: nominal 95 % intervals cover about 89–95 %",
        ),
    )


def _second_solution(fitted: Fitted) -> tuple[Finding, ...]:
    if fitted.second is None:
        return ()
    pairs = zip(fitted.problem.model.names, fitted.second, strict=True)
    return (
        Finding(
            "two-solutions",
            "a second curve fits nearly as well and reads the standards back differently "
            f"({', '.join(f'{n} {v:.4g}' for n, v in pairs)}); add levels or fix a parameter",
        ),
    )


def _contradicted(noise: NoiseModel, chi_square: float, nu: int) -> tuple[Finding, ...]:
    """Known standard uncertainties that the scatter of the readings contradicts."""
    if not noise.known_scale or nu <= 0:
        return ()
    probability = float(chdtrc(nu, chi_square))
    if probability >= CONTRADICTED:
        return ()
    return (
        Finding(
            "u-contradicted",
            f"the residuals are larger than the given standard uncertainties allow (chi-square {chi_square:.4g} "
            f"with {nu} degrees of freedom, p = {probability:.1e}); check u or the model",
        ),
    )


def _r_squared(problem: Problem, solution: Solution) -> float:
    weight = problem.root_weight**2
    mean = float(np.sum(weight * problem.y) / np.sum(weight))
    total = float(np.sum(weight * (problem.y - mean) ** 2))
    return 1.0 - solution.weighted_sum / total if total > 0 else np.nan


def _aicc(weighted_sum: float, n: int, free: int) -> float:
    """AICc with k = free parameters + 1; comparable only under the same noise model."""
    k = free + 1
    if n - k - 1 <= 0 or weighted_sum <= 0:
        return np.nan
    return float(n * np.log(weighted_sum / n) + 2 * k + 2 * k * (k + 1) / (n - k - 1))


def unfitted_curve(
    problem: Problem,
    standards: Standards,
    requested: str | NoiseModel,
    solver: str,
    finding: Finding | None = None,
) -> Curve:
    """A curve that could not be fitted, with the reason as its finding."""
    k, count = len(problem.model.names), int(problem.free.sum())
    message = (
        f"{standards.levels} distinct level(s) for {count} free parameters of model "
        f"'{problem.model.name}'; measure at least {count} levels"
    )
    unbound = standards.response.size == 0
    return Curve(
        response_model=problem.model,
        values=frozen(np.where(problem.free, np.nan, problem.template)),
        free=problem.free,
        lower=frozen(problem.lower),
        upper=frozen(problem.upper),
        covariance=frozen(np.full((k, k), np.nan)),
        noise=UniformNoise()
        if unbound or isinstance(requested, str)
        else requested.bound_to(standards.response),
        standards=standards,
        residual_sum=np.nan,
        degrees_of_freedom=max(standards.response.size - count, 0),
        scale=np.nan,
        coverage_freedom=0.0,
        r_squared=np.nan,
        aicc=np.nan,
        determined=~problem.free,
        converged=False,
        findings=(finding or Finding("too-few-levels", message),),
        solver=solver,
    )
