"""From standards to a curve."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calib.curves.assemble import Fitted, curve_from, unfitted_curve
from calib.curves.curve import Curve
from calib.curves.diagnostics import information
from calib.curves.estimate_noise import FIRST, ONE_RUN, STANDS_STILL, solve_estimating_noise
from calib.curves.levels import collapsed, uncollapsed
from calib.curves.noise import GivenNoise, NoiseModel, given_noise, of_run
from calib.curves.requests import Bounds, problem_of, requested_noise
from calib.curves.reweight import PASSES, SETTLED, solve_with_noise
from calib.curves.solver import SOLVERS, Problem, Solution, solve, stack_of_one
from calib.curves.standards import checked_standards
from calib.curves.variance_function import estimate_variance_function
from calib.errors import ModelError
from calib.models import ResponseModel, response_model

Array = NDArray[np.float64]


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
    if problem.separable and solver == "least-squares":
        fitted = _fit_through_stack(problem, requested, start or {})
    elif isinstance(requested, str):
        fitted = _fit_estimating_noise(problem, requested, start or {}, solver)
    else:
        fitted = _fit_with_noise(problem, requested.bound_to(problem.y), start or {}, solver)
    return curve_from(fitted, standards, solver)


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
    starts = _starts(problem, start)
    if noise.follows_fit:
        first = solve(problem, starts, solver)
        return _follow(problem, noise, [first.parameters, *starts], solver)
    weighted = weighted_problem(problem, noise, problem.y)
    return Fitted(solve(weighted, starts, solver), noise, weighted, stable=True)


def _fit_through_stack(problem: Problem, requested: str | NoiseModel, start: Mapping[str, float]) -> Fitted:
    """One run is a stack of one."""
    stack = stack_of_one(problem)
    column = problem.y[:, None]
    # Standard deviations given reading by reading forbid collapsing.
    given_sd = isinstance(requested, GivenNoise)
    levels = uncollapsed(problem.x, column) if given_sd else collapsed(problem.x, column)
    given = _given(problem, start)
    starts: Array | dict[int, Array] = given
    if len(given) == int(problem.free.sum()):
        starts = _full_start(problem, given)
    if isinstance(requested, str):
        estimated = solve_estimating_noise(problem, stack, levels, requested, starts)
        settled, noise = estimated.settled, of_run(estimated.noise, 0)
    else:
        noise = requested.bound_to(problem.y)
        settled = solve_with_noise(stack, levels, _sorted(noise, problem.x), starts)
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
    noise = FIRST.bound_to(problem.y)
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
        if np.ptp(shape) < STANDS_STILL:
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
