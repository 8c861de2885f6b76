"""The steps of the stacked solver for one run, on plain vectors.

One run in the stack costs as many array operations as a thousand; for a handful of runs
the same algorithm on vectors and Python numbers is several times faster. `stack_solver`
explains it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.stack_roles import Roles, Rules
from calib.models import ResponseModel

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Single:
    """One run: levels x, means y, root weights (n,), pure error, and bounds in solver coordinates."""

    model: ResponseModel
    x: Array
    y: Array
    root_weight: Array
    pure: float
    template: list[float]
    low: list[float]
    high: list[float]


@dataclass(frozen=True, slots=True)
class Point:
    """The run evaluated at searched coordinates."""

    total: float
    linear: list[float]
    normal: list[list[float]]
    slope: list[float]


@dataclass(frozen=True, slots=True)
class End:
    """Where the run ended."""

    theta: list[float]
    point: Point
    tangent: float
    steps: int


def solve_single(run: Single, roles: Roles, rules: Rules, theta: list[float]) -> End:
    """Minimise the weighted sum of squares of one run from searched coordinates."""
    floor = rules.floor * float(np.sum((run.root_weight * run.y) ** 2))
    here = evaluate(run, roles, theta)
    damping = 0.0
    predicted = math.inf
    for count in range(1, rules.steps + 1):
        held = _held(theta, here.slope, run)
        step, predicted = _step(here, damping, held)
        reach = _reach(theta, step, run)
        trial = [t + reach * s for t, s in zip(theta, step, strict=True)]
        there = evaluate(run, roles, trial)
        total = here.total + run.pure
        close = predicted <= rules.close * total + floor
        taken = there.total < here.total or (
            close and there.total <= here.total * (1.0 + rules.close) + floor
        )
        enough = predicted <= rules.enough * total + floor
        last = enough and damping == 0.0 and reach == 1.0
        done = last or (enough and taken) or damping >= rules.most_damping or not math.isfinite(here.total)
        done = done or predicted <= 0.0
        if taken:
            theta, here = trial, there
            damping = damping * 0.1 if damping > rules.no_damping else 0.0
        else:
            damping = max(damping * 10.0, rules.first_damping)
        if done:
            tangent = math.sqrt(max(predicted, 0.0)) if last else _tangent(theta, here, run)
            return End(theta, here, tangent, count)
    return End(theta, here, _tangent(theta, here, run), rules.steps)


def evaluate(run: Single, roles: Roles, theta: list[float]) -> Point:
    """Sum, linear parameters, and the normal equations of the searched coordinates."""
    p: list[float] = [u if linear else t for u, t, linear in roles.plain(run.template)]
    for value, i, log in zip(theta, roles.searched, roles.in_logarithm, strict=True):
        if not roles.is_linear[i]:
            p[i] = _exp(value) if log else value
    derivative = run.model.derivatives(run.x, p)
    weight = run.root_weight
    linear: dict[int, float] = {}
    rest = run.y
    for i in roles.held_linear:
        linear[i] = theta[roles.searched.index(i)] if i in roles.searched else run.template[i]
        rest = rest - linear[i] * derivative[i]
    residual = weight * rest
    orthogonal, solved = _eliminate([weight * derivative[i] for i in roles.eliminated], residual)
    for q, part in orthogonal:
        residual = residual - part * q
    linear.update(zip(roles.eliminated, solved, strict=True))
    amplitude = sum(w * linear[i] for i, w in roles.amplitude)
    tangents = []
    for i, log in zip(roles.searched, roles.in_logarithm, strict=True):
        scale = 1.0 if roles.is_linear[i] else amplitude * (p[i] if log else 1.0)
        tangent = (weight * derivative[i]) * scale
        for q, _ in orthogonal:
            tangent = tangent - (q @ tangent) * q
        tangents.append(tangent)
    total = float(residual @ residual)
    normal = [[float(a @ b) for b in tangents] for a in tangents]
    return Point(
        total if math.isfinite(total) else math.inf, solved, normal, [float(a @ residual) for a in tangents]
    )


def _exp(value: float) -> float:
    return math.exp(value) if value < 709.0 else math.inf


def _eliminate(basis: list[Array], residual: Array) -> tuple[list[tuple[Array, float]], list[float]]:
    """Orthogonal directions with the residual's parts along them, and the linear parameters."""
    orthogonal: list[tuple[Array, float]] = []
    triangle: list[list[float]] = []
    rounds = 2 if len(basis) > 2 else 1
    for v in basis:
        column = [0.0] * len(orthogonal)
        for _ in range(rounds):
            for j, (q, _) in enumerate(orthogonal):
                part = float(q @ v)
                column[j] += part
                v = v - part * q
        length = math.sqrt(float(v @ v))
        q = v / length if length > 0 else v
        orthogonal.append((q, float(q @ residual)))
        triangle.append([*column, length])
    solved = [0.0] * len(basis)
    for i in reversed(range(len(basis))):
        value = orthogonal[i][1] - sum(triangle[j][i] * solved[j] for j in range(i + 1, len(basis)))
        solved[i] = value / triangle[i][i] if triangle[i][i] > 0 else 0.0
    return orthogonal, solved


def _held(theta: list[float], slope: list[float], run: Single) -> list[bool]:
    """Coordinates on a bound that the steepest descent would push across."""
    return [
        (t <= low and s < 0) or (t >= high and s > 0)
        for t, s, low, high in zip(theta, slope, run.low, run.high, strict=True)
    ]


def _step(here: Point, damping: float, held: list[bool]) -> tuple[list[float], float]:
    """Damped Gauss–Newton step and the decrease of the sum it predicts."""
    m = len(here.slope)
    a = [row.copy() for row in here.normal]
    b = here.slope.copy()
    for i in range(m):
        if held[i]:
            b[i] = 0.0
            for j in range(m):
                a[i][j] = a[j][i] = 0.0
    for i in range(m):
        a[i][i] = a[i][i] * (1.0 + damping) if a[i][i] > 0 else 1.0
    step = _solved(a, b.copy())
    along = sum(s * g for s, g in zip(step, b, strict=True))
    if damping == 0.0:
        return step, along if math.isfinite(along) else 0.0
    curved = sum(step[i] * here.normal[i][j] * step[j] for i in range(m) for j in range(m))
    predicted = 2.0 * along - curved
    return step, predicted if math.isfinite(predicted) else 0.0


def _solved(a: list[list[float]], b: list[float]) -> list[float]:
    """Elimination without pivoting, for a positive (semi)definite matrix."""
    m = len(b)
    for i in range(m):
        if a[i][i] == 0.0:
            return [0.0] * m
        for j in range(i + 1, m):
            factor = a[j][i] / a[i][i]
            for k in range(i, m):
                a[j][k] -= factor * a[i][k]
            b[j] -= factor * b[i]
    for i in reversed(range(m)):
        for j in range(i + 1, m):
            b[i] -= a[i][j] * b[j]
        b[i] /= a[i][i] if a[i][i] != 0.0 else math.inf
    return [v if math.isfinite(v) else 0.0 for v in b]


def _reach(theta: list[float], step: list[float], run: Single) -> float:
    """Share of the whole step that stays inside the bounds."""
    reach = 1.0
    for t, s, low, high in zip(theta, step, run.low, run.high, strict=True):
        if s != 0.0:
            reach = min(reach, ((high if s > 0 else low) - t) / s)
    return max(reach, 0.0)


def _tangent(theta: list[float], here: Point, run: Single) -> float:
    """Norm of the residual's part in the tangent plane, held coordinates left out."""
    held = _held(theta, here.slope, run)
    step, predicted = _step(here, 0.0, held)
    return math.sqrt(max(predicted, 0.0)) if step else 0.0
