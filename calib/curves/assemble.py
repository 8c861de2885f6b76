"""From a solution to a frozen curve with everything worth saying about it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc

from calib.curves.curve import Curve
from calib.curves.diagnostics import Finding, Information, findings_of, information
from calib.curves.estimate_noise import ONE_RUN
from calib.curves.history_noise import ENOUGH_RUNS, HistoryNoise
from calib.curves.noise import NoiseModel, UniformNoise
from calib.curves.solver import Problem, Solution
from calib.curves.standards import Standards, frozen

Array = NDArray[np.float64]

# One honest run in a thousand contradicts its own standard uncertainties.
CONTRADICTED = 1e-3


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


def curve_from(fitted: Fitted, standards: Standards, solver: str) -> Curve:
    """The frozen curve of one run."""
    problem, solution = fitted.problem, fitted.solution
    nu = standards.response.size - int(problem.free.sum())
    mean = problem.model.response(problem.x, solution.parameters)
    noise = fitted.noise.after_fit(mean)
    scale, freedom = (float(v) for v in noise.scale(solution.weighted_sum, nu))
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
        coverage_freedom=freedom,
        r_squared=_r_squared(problem, solution),
        determined=info.determined,
        aicc=_aicc(solution.weighted_sum, standards.response.size, int(problem.free.sum())),
        converged=solution.converged and fitted.stable,
        findings=(
            *findings,
            *_noise_findings(noise, solution.weighted_sum, nu),
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


def _noise_findings(noise: NoiseModel, weighted_sum: float, nu: int) -> tuple[Finding, ...]:
    if isinstance(noise, HistoryNoise):
        noisy = noise.noisy_run(weighted_sum, nu)
        few = (_few_runs("variance-from-few-runs", noise.runs),) if noise.runs < ENOUGH_RUNS else ()
        return (*few, *((Finding("noisy-run", noisy),) if noisy else ()))
    if getattr(noise, "origin", "") == ONE_RUN:
        return (_few_runs("variance-from-one-run", 1),)
    return ()


def _few_runs(code: str, runs: int) -> Finding:
    which = "1 run" if runs == 1 else f"{runs} runs"
    return Finding(code, f"variance function from {which}: nominal 95 % intervals cover about 89–95 %")


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
