"""One run as a problem, and the solvers that take one run at a time.

Built-in models go through the stacked solver (`reweight`, `search`, `stack_solver`);
formulas of the user and the simplex come here. Positive parameters are solved in their
logarithm, and residuals are scaled to order one.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from calib.curves.search import OFFSET_LIMIT, ROUNDING
from calib.curves.stack_problem import Stack
from calib.errors import ModelError
from calib.models import ResponseModel

Array = NDArray[np.float64]
SOLVERS = ("least-squares", "simplex")

HUGE = 1e120
# A search without derivatives takes the place of least squares where it lowers the sum by this share.
WORTH_RESCUING = 1e-6


@dataclass(frozen=True, slots=True)
class Problem:
    """What is to be minimised: sum of (root_weight · (response − y))².

    Attributes
    ----------
    x, y, root_weight : arrays with n rows
    template : (k,) array
        Values of the fixed parameters; the free ones are replaced.
    free : (k,) bool array
    lower, upper : (k,) arrays
        Bounds in natural coordinates.
    given_bounds : (k,) bool array
        Which bounds somebody asked for; the others are the model's wide sanity bounds.
    """

    model: ResponseModel
    x: Array
    y: Array
    root_weight: Array
    template: Array
    free: NDArray[np.bool_]
    lower: Array
    upper: Array
    given_bounds: NDArray[np.bool_]

    @property
    def scale(self) -> float:
        """Norm of the weighted responses."""
        return float(np.linalg.norm(self.root_weight * self.y)) or 1.0

    @property
    def separable(self) -> bool:
        """Whether linear parameters can be eliminated and one amplitude carries the others."""
        return bool(self.model.amplitude) or bool(self.model.linear.all())

    @property
    def in_logarithm(self) -> NDArray[np.bool_]:
        """Which of the free parameters are solved in their logarithm."""
        return self.model.positive[self.free]

    def parameters(self, coordinates: Array) -> Array:
        """Full parameter vector of solver coordinates."""
        p = self.template.copy()
        with np.errstate(over="ignore"):
            p[self.free] = np.where(self.in_logarithm, np.exp(coordinates), coordinates)
        return p

    def coordinates(self, p: Array) -> Array:
        """Solver coordinates of a full parameter vector."""
        values = p[self.free]
        return np.where(self.in_logarithm, np.log(np.where(self.in_logarithm, values, 1.0)), values)

    def limits(self) -> tuple[Array, Array]:
        """Bounds in solver coordinates."""
        with np.errstate(divide="ignore", invalid="ignore"):
            low = np.where(
                self.in_logarithm, np.log(np.maximum(self.lower[self.free], 0)), self.lower[self.free]
            )
            high = np.where(
                self.in_logarithm, np.log(np.maximum(self.upper[self.free], 0)), self.upper[self.free]
            )
        return low, high

    def residual(self, coordinates: Array) -> Array:
        """Scaled weighted residuals (n,); huge where the model breaks down."""
        with np.errstate(all="ignore"):
            fitted = self.model.response(self.x, self.parameters(coordinates))
            r = self.root_weight / self.scale * (fitted - self.y)
        return np.where(np.isfinite(r), np.clip(r, -HUGE, HUGE), HUGE)

    def jacobian(self, coordinates: Array) -> Array:
        """Derivatives of `residual` in the solver coordinates (n, free)."""
        p = self.parameters(coordinates)
        with np.errstate(all="ignore"):
            j = self.model.gradient(self.x, p)[:, self.free] * (self.root_weight / self.scale)[:, None]
            j = j * np.where(self.in_logarithm, p[self.free], 1.0)
        return np.where(np.isfinite(j), j, 0.0)


@dataclass(frozen=True, slots=True)
class Solution:
    """Where a solver ended.

    Attributes
    ----------
    parameters : (k,) array
    weighted_sum : float
    converged : bool
        The residual is orthogonal to the tangent plane, within `OFFSET_LIMIT`.
    offset : float
        Share of the residual left in the tangent plane.
    rescued : bool
        Least squares did not settle, and the derivative-free simplex found a lower sum.
    """

    parameters: Array
    weighted_sum: float
    converged: bool
    offset: float
    rescued: bool = False


def solve(problem: Problem, starts: list[Array], solver: str) -> Solution:
    """Best of the solutions found from several starts.

    Parameters
    ----------
    problem : Problem
    starts : list of (k,) arrays
        Full parameter vectors.
    solver : {'least-squares', 'simplex'}

    Raises
    ------
    ModelError
        For an unknown solver.
    """
    if solver not in SOLVERS:
        raise ModelError(f"unknown solver '{solver}'; known are {', '.join(SOLVERS)}")
    from calib.curves.general_solver import general_least_squares
    from calib.curves.simplex import polished_simplex

    inside = [_inside(problem, s) for s in starts]
    if solver == "simplex":
        return _best([_described(problem, polished_simplex(problem, c)) for c in inside])
    best = _best([_described(problem, general_least_squares(problem, c)) for c in inside])
    if best.converged:
        return best
    # Without derivatives, where they led nowhere: a formula with kinks, or a start on the flat.
    without = _described(problem, polished_simplex(problem, _inside(problem, best.parameters)))
    lower = without.weighted_sum < best.weighted_sum * (1.0 - WORTH_RESCUING)
    return replace(without, rescued=True) if lower else best


def _best(solutions: list[Solution]) -> Solution:
    return min(solutions, key=lambda s: (not np.isfinite(s.weighted_sum), s.weighted_sum))


def stack_of_one(problem: Problem) -> Stack:
    """Model, fixed values, bounds and raw readings of one run as a stack."""
    return Stack(
        model=problem.model,
        x=problem.x[:, None],
        y=problem.y[:, None],
        root_weight=problem.root_weight[:, None],
        pure=np.zeros(1),
        template=problem.template,
        free=problem.free,
        lower=problem.lower[:, None],
        upper=problem.upper[:, None],
    )


def _inside(problem: Problem, start: Array) -> Array:
    """Solver coordinates of a start, moved just inside the bounds."""
    low, high = problem.limits()
    p = np.where(np.isfinite(start), start, 1.0)
    p = np.where(problem.model.positive & (p <= 0), 1e-300, p)
    c = problem.coordinates(p)
    with np.errstate(over="ignore"):
        span = high - low
    width = np.where(np.isfinite(span), span, 1.0)
    return np.clip(c, low + 1e-9 * width, high - 1e-9 * width)


def within(problem: Problem, coordinates: Array) -> bool:
    """Whether solver coordinates lie strictly inside the bounds."""
    low, high = problem.limits()
    return bool(np.all((coordinates > low) & (coordinates < high)))


def at_bound(problem: Problem, coordinates: Array) -> NDArray[np.bool_]:
    """Which of the free parameters (solver coordinates) sit on a bound."""
    low, high = problem.limits()
    with np.errstate(over="ignore"):
        span = high - low
    near = 1e-6 * np.where(np.isfinite(span), span, np.maximum(np.abs(coordinates), 1e-300))
    return (coordinates - low <= near) | (high - coordinates <= near)


def gauss_newton_step(jacobian: Array, residual: Array) -> tuple[Array, float]:
    """Full step and the norm of the residual's part in the tangent plane.

    Columns are scaled to length one first, which makes the step as accurate as the
    data allow.
    """
    length = np.linalg.norm(jacobian, axis=0)
    length = np.where(length > 0, length, 1.0)
    scaled = jacobian / length
    step, *_ = np.linalg.lstsq(scaled, -residual, rcond=None)
    return step / length, float(np.linalg.norm(scaled @ step))


def _described(problem: Problem, coordinates: Array) -> Solution:
    r = problem.residual(coordinates)
    jacobian = problem.jacobian(coordinates)
    # A parameter held by its bound cannot move that way: judge the others.
    inside = ~at_bound(problem, coordinates)
    _, tangent = gauss_newton_step(jacobian[:, inside], r) if inside.any() else (r, 0.0)
    norm = float(np.linalg.norm(r))
    offset = tangent / norm if norm > 0 else 0.0
    converged = bool(np.isfinite(norm) and norm < HUGE and tangent <= OFFSET_LIMIT * norm + ROUNDING)
    return Solution(problem.parameters(coordinates), (norm * problem.scale) ** 2, converged, offset)
