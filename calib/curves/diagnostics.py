"""What is wrong with a fit, in words: the findings."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtrc

from calib.curves.solver import Problem, Solution, at_bound
from calib.models import Asymptote

Array = NDArray[np.float64]

# Rules for 'asymptote not reached', from simulation of partial curves (DEVELOPERS.md).
PLATEAU_RELATIVE_U = 0.25
PLATEAU_CONDITION = 40.0
PLATEAU_SHARE = 0.5
SINGULAR = 1e-12
# A residual this small against the responses is rounding, not scatter.
NO_SCATTER = 1e-12
FLAT = 0.05
# Share of a direction that was cut off from which on a parameter counts as not determined.
LOADING = 1e-6
# The condition rule was measured for curves of up to four free parameters: an asymmetry raises the
# condition of a complete curve above it by itself.
CONDITION_PARAMETERS = 4


@dataclass(frozen=True, slots=True)
class Finding:
    """Something a person must know about a curve."""

    code: str
    message: str


@dataclass(frozen=True, slots=True)
class Information:
    """What the standards say about the parameters.

    Attributes
    ----------
    inverse : (k, k) array
        Inverse of J'WJ in natural coordinates, zero for fixed parameters.
    condition : float
        kappa, the condition of J'WJ scaled to unit diagonal, in solver coordinates.
    reciprocal : float
        1/kappa² (0 when singular).
    leverage : (n,) array
        Diagonal of the hat matrix.
    determined : (k,) bool array
        False for parameters on a bound, or with a part in a direction that was cut off as
        singular: their variance would come out too small.
    """

    inverse: Array
    condition: float
    reciprocal: float
    leverage: Array
    determined: NDArray[np.bool_]


def information(problem: Problem, parameters: Array) -> Information:
    """Evaluate J'WJ at the solution through a singular-value decomposition."""
    c = problem.coordinates(parameters)
    on_bound = at_bound(problem, c)
    jacobian = problem.jacobian(c) * problem.scale
    with np.errstate(over="ignore", invalid="ignore"):
        length = np.linalg.norm(jacobian, axis=0)
        usable = np.where((length > 0) & np.isfinite(length), length, 1.0)
        left, singular, right = np.linalg.svd(jacobian / usable, full_matrices=False)
        kept = singular > singular[0] * np.sqrt(SINGULAR)
        chain = np.where(problem.in_logarithm, parameters[problem.free], 1.0)
        root = (right[kept].T / singular[kept]) * (chain / usable)[:, None]
        inverse = np.zeros((parameters.size, parameters.size))
        inverse[np.ix_(problem.free, problem.free)] = root @ root.T
    determined = np.ones(parameters.size, dtype=bool)
    determined[problem.free] = ~on_bound & (np.sum(right[~kept] ** 2, axis=0) < LOADING)
    condition = _condition(jacobian[:, ~on_bound])
    return Information(inverse, condition, 1.0 / condition**2, np.sum(left[:, kept] ** 2, axis=1), determined)


def _condition(jacobian: Array) -> float:
    """Kappa of the columns scaled to length one, those on a bound left out."""
    if jacobian.shape[1] == 0:
        return 1.0
    length = np.linalg.norm(jacobian, axis=0)
    if not np.all((length > 0) & np.isfinite(length)):
        return np.inf
    singular = np.linalg.svd(jacobian / length, compute_uv=False)
    return float(singular[0] / singular[-1]) if singular[-1] > 0 else np.inf


def findings_of(
    problem: Problem, solution: Solution, info: Information, scale: float, stable: bool
) -> tuple[Finding, ...]:
    """Everything worth saying about one solution."""
    found: list[Finding] = []
    if not solution.converged or not stable:
        found.append(_not_converged(solution, stable))
    if solution.rescued:
        found.append(
            Finding(
                "simplex-needed",
                "least squares did not settle; the curve comes from a search without derivatives (simplex): "
                "check the formula for kinks and the start values",
            )
        )
    found.extend(_bounds_hit(problem, solution.parameters))
    if info.reciprocal < SINGULAR:
        found.append(
            Finding(
                "not-identifiable",
                "the standards do not determine all parameters (singular information); "
                "add levels where the curve bends or fix a parameter",
            )
        )
    if problem.y.size <= int(problem.free.sum()):
        found.append(
            Finding("no-residual-freedom", "as many readings as free parameters: no uncertainty can be given")
        )
    found.extend(_scatter(problem, solution))
    found.extend(_flat(problem, solution))
    found.extend(_turning_point(problem, solution.parameters))
    if problem.model.plateau:
        plateaus = _plateaus(problem, solution.parameters, info, scale)
        found.extend(plateaus or _undetermined(problem, solution.parameters, info, scale))
    else:
        found.extend(_loose_parameters(problem, solution.parameters, info, scale, PLATEAU_RELATIVE_U))
    return tuple(found)


def _not_converged(solution: Solution, stable: bool) -> Finding:
    if not stable:
        return Finding(
            "not-converged", "the fit did not settle while the noise model followed the fitted means"
        )
    return Finding(
        "not-converged",
        f"the fit did not converge (relative offset {solution.offset:.1e}); "
        "the data may have no finite best curve for this model",
    )


def _bounds_hit(problem: Problem, parameters: Array) -> list[Finding]:
    """Parameters on a bound; a sanity bound of a curve with plateaus is told by `_plateaus`."""
    return [
        Finding(
            "at-bound",
            f"{problem.model.names[i]} = {parameters[i]:.6g} sits on its bound "
            f"[{problem.lower[i]:.6g}, {problem.upper[i]:.6g}]; its standard error means nothing",
        )
        for i in _on_bound(problem, parameters)
        if problem.given_bounds[i] or not problem.model.plateau
    ]


def _on_bound(problem: Problem, parameters: Array) -> list[int]:
    hit = at_bound(problem, problem.coordinates(parameters))
    return [int(i) for i in np.flatnonzero(problem.free)[hit]]


def _sanity_bounds_hit(problem: Problem, parameters: Array) -> list[str]:
    """The best curve lies at infinity: values inside the standards stand all the same."""
    return [
        f"{problem.model.names[i]} runs away to {parameters[i]:.2g}"
        for i in _on_bound(problem, parameters)
        if not problem.given_bounds[i]
    ]


def _scatter(problem: Problem, solution: Solution) -> list[Finding]:
    """Readings without the scatter that an uncertainty could rest on."""
    nu = problem.y.size - int(problem.free.sum())
    size = float(np.sum((problem.root_weight * problem.y) ** 2))
    if nu > 0 and size > 0 and solution.weighted_sum <= NO_SCATTER**2 * size:
        return [
            Finding(
                "no-scatter", "the readings lie on the curve to the last digit: no uncertainty can be given"
            )
        ]
    if problem.x.ndim > 1 or not _replicates_identical(problem.x, problem.y):
        return []
    return [
        Finding(
            "identical-replicates",
            "all replicates of every level are identical (copied, or the resolution is too coarse): "
            "intervals may be too short",
        )
    ]


def _replicates_identical(x: Array, y: Array) -> bool:
    """Whether at least three levels have replicates and none of them scatter."""
    levels, place, count = np.unique(x, return_inverse=True, return_counts=True)
    repeated = count > 1
    if repeated.sum() < 3:
        return False
    low, high = np.full(levels.size, np.inf), np.full(levels.size, -np.inf)
    np.minimum.at(low, place, y)
    np.maximum.at(high, place, y)
    return bool(np.all((high == low)[repeated]))


def _flat(problem: Problem, solution: Solution) -> list[Finding]:
    """Whether the curve explains no more than its mean does, by an F test at 5 %."""
    free = int(problem.free.sum())
    nu = problem.y.size - free
    if free < 2 or nu <= 0:
        return []
    weight = problem.root_weight**2
    mean = float(np.sum(weight * problem.y) / np.sum(weight))
    about = float(np.sum(weight * (problem.y - mean) ** 2))
    explained = max(about - solution.weighted_sum, 0.0) / (free - 1)
    noise = solution.weighted_sum / nu
    if explained > 0 and (noise == 0 or fdtrc(free - 1, nu, explained / noise) <= FLAT):
        return []
    return [
        Finding("flat", "the response does not change significantly with the concentration (F test, 5 %)")
    ]


def _turning_point(problem: Problem, p: Array) -> list[Finding]:
    """Whether the curve turns back inside the standards, where two concentrations share a response."""
    if problem.model.logarithmic or problem.x.ndim > 1 or not np.all(np.isfinite(p)):
        return []
    first, last = float(problem.x.min()), float(problem.x.max())
    low, high = problem.model.branch(p, first, last)
    if low <= first and last <= high:
        return []
    turn = low if low > first else high
    return [
        Finding(
            "turning-point",
            f"the curve turns at concentration {turn:.4g}, inside the standards: a response there has two "
            "concentrations, and only the arm with most standards is read back",
        )
    ]


def _plateaus(problem: Problem, p: Array, info: Information, scale: float) -> list[Finding]:
    """One finding with every reason why the plateaus are not determined."""
    zero, infinite = problem.model.limit_at_zero(p), problem.model.limit_at_infinity(p)
    if zero is None or infinite is None:
        return []
    span = infinite.response - zero.response
    if span == 0.0:
        return [Finding("asymptote-not-reached", "the curve is flat: no plateau can be told from the other")]
    reasons = [
        *_end_not_reached(problem, p, infinite, float(problem.x.max()), span, "highest"),
        *_end_not_reached(problem, p, zero, float(problem.x.min()), span, "lowest"),
    ]
    gradient = infinite.gradient - zero.gradient
    u = scale * float(np.sqrt(gradient @ info.inverse @ gradient))
    if u > PLATEAU_RELATIVE_U * abs(span):
        reasons.append(f"u of the span between the plateaus is {100 * u / abs(span):.0f} % of it")
    reasons.extend(_sanity_bounds_hit(problem, p))
    if info.condition > PLATEAU_CONDITION and problem.free.sum() <= CONDITION_PARAMETERS:
        reasons.append(f"condition of the parameters {info.condition:.0f}, above {PLATEAU_CONDITION:.0f}")
    if not reasons:
        return []
    return [
        Finding(
            "asymptote-not-reached",
            f"plateau not determined by the standards ({'; '.join(reasons)}): the parameters are not "
            "identified, values inside the standards stand, nothing is extrapolated",
        )
    ]


def _end_not_reached(
    problem: Problem, p: Array, limit: Asymptote, edge: float, span: float, which: str
) -> list[str]:
    """Whether the outermost standard stays short of a plateau that is free."""
    if not np.any(limit.gradient[problem.free] != 0):
        return []
    reached = 1.0 - abs(limit.response - float(problem.model.response(edge, p))) / abs(span)
    if reached >= PLATEAU_SHARE:
        return []
    return [f"the {which} standard reaches {100 * reached:.0f} % of the span"]


def _undetermined(problem: Problem, p: Array, info: Information, scale: float) -> list[Finding]:
    """Positive parameters that u exceeds though both plateaus are seen: a step between two levels."""
    if problem.free.sum() > CONDITION_PARAMETERS:
        return []
    return _loose_parameters(problem, p, info, scale, 1.0)


def _loose_parameters(
    problem: Problem, p: Array, info: Information, scale: float, share: float
) -> list[Finding]:
    """Positive parameters whose u exceeds a share of them."""
    u = scale * np.sqrt(np.diag(info.inverse))
    loose = problem.model.positive & problem.free & (u > share * np.abs(p))
    return [
        Finding(
            "not-identifiable",
            f"{problem.model.names[i]} = {p[i]:.4g} has u = {u[i]:.2g}: the standards hardly determine it",
        )
        for i in np.flatnonzero(loose)
    ]
