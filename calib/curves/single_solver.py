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

from calib.curves.stack_roles import EXACT, SOUND, Roles, Rules
from calib.models import ResponseModel

Array = NDArray[np.float64]
Matrix = list[list[float]]


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
    """The run evaluated at searched coordinates; as in `stack_points`."""

    total: float
    linear: list[float]
    normal: list[list[float]]
    slope: list[float]
    exact: bool


@dataclass(frozen=True, slots=True)
class End:
    """Where the run ended, and whether it settled there."""

    theta: list[float]
    point: Point
    tangent: float
    steps: int
    settled: bool


def solve_single(run: Single, roles: Roles, rules: Rules, theta: list[float], before: list[float]) -> End:
    """Minimise the weighted sum of squares of one run from searched coordinates."""
    weighted = run.root_weight * run.y
    floor = rules.floor * float(weighted @ weighted)
    here = evaluate(run, roles, theta, before)
    if not here.exact:
        here = evaluate(run, roles, theta, here.linear)
    damping = 0.0
    m = range(len(theta))
    second = [[0.0 for _ in m] for _ in m]
    for count in range(1, rules.steps + 1):
        held = _held(theta, here.slope, run)
        step, predicted = _step(_sum(here.normal, second), here.slope, damping, held)
        if not predicted >= 0.0:
            # The completed matrix leads uphill: do without.
            second = [[0.0 for _ in m] for _ in m]
            step, predicted = _step(here.normal, here.slope, damping, held)
        trial, whole = _reach(theta, step, run)
        there = evaluate(run, roles, trial, here.linear)
        total = here.total + run.pure
        close = predicted <= rules.close * total + floor
        usable = math.isfinite(here.total) and math.isfinite(there.total)
        taken = usable and (
            there.total < here.total or (close and there.total <= here.total * (1.0 + rules.close) + floor)
        )
        plain = whole and damping == 0.0
        enough = usable and predicted <= rules.enough * total + floor
        settled = enough and (taken or plain)
        lost = not usable or damping >= rules.most_damping or predicted <= 0.0
        if taken and plain and predicted <= rules.near * total:
            moved = [b - a for a, b in zip(theta, trial, strict=True)]
            change = [a - b for a, b in zip(here.slope, there.slope, strict=True)]
            second = _secant_update(second, moved, change, there.normal)
        else:
            second = [[0.0 for _ in m] for _ in m]
        if taken:
            theta, here = trial, there
            damping = damping * 0.1 if damping > rules.no_damping else 0.0
        else:
            damping = max(damping * 10.0, rules.first_damping)
        if settled or lost:
            tangent = math.sqrt(max(predicted, 0.0)) if enough and plain else _tangent(theta, here, run)
            return End(theta, here, tangent, count, settled)
    return End(theta, here, _tangent(theta, here, run), rules.steps, True)


def evaluate(run: Single, roles: Roles, theta: list[float], before: list[float]) -> Point:
    """Sum, linear parameters, and the normal equations of the searched coordinates."""
    p: list[float] = [u if linear else t for u, t, linear in roles.plain(run.template)]
    for value, i, log in zip(theta, roles.searched, roles.in_logarithm, strict=True):
        if not roles.is_linear[i]:
            p[i] = _exp(value) if log else value
    derivative = run.model.derivatives(run.x, p)
    held = {
        i: theta[roles.searched.index(i)] if i in roles.searched else run.template[i]
        for i in roles.held_linear
    }
    rest = run.y
    for i, value in held.items():
        rest = rest - value * derivative[i]
    q = len(roles.eliminated)
    columns = np.array(
        [*(derivative[i] for i in roles.eliminated), *(derivative[i] for i in roles.searched), rest]
    )
    columns *= run.root_weight
    if q:
        columns[-1] -= np.dot(before, columns[:q])
    gram: list[list[float]] = np.dot(columns, columns.T).tolist()
    whole = gram[-1][-1]
    correction, sound = _swept(gram, q)
    linear = [b + c for b, c in zip(before, correction, strict=True)]
    amplitude = sum(
        w * (held[i] if i in held else linear[roles.eliminated.index(i)]) for i, w in roles.amplitude
    )
    scale = [
        1.0 if roles.is_linear[i] else amplitude * (p[i] if log else 1.0)
        for i, log in zip(roles.searched, roles.in_logarithm, strict=True)
    ]
    m = range(len(scale))
    total = gram[-1][-1]
    return Point(
        max(total, 0.0) if sound and math.isfinite(total) else math.inf,
        linear,
        [[gram[q + min(i, j)][q + max(i, j)] * scale[i] * scale[j] for j in m] for i in m],
        [gram[q + i][-1] * scale[i] for i in m],
        total > EXACT * whole,
    )


def _exp(value: float) -> float:
    return math.exp(value) if value < 709.0 else math.inf


def _swept(gram: list[list[float]], q: int) -> tuple[list[float], bool]:
    """Eliminate the first ``q`` columns in place; their solution, and whether enough digits are left."""
    last = len(gram) - 1
    whole = [gram[i][i] for i in range(last)]
    for i in range(q):
        pivot = gram[i][i]
        if not pivot > SOUND * whole[i]:
            return [0.0] * q, False
        for j in range(i + 1, last + 1):
            factor = gram[i][j] / pivot
            for k in range(j, last + 1):
                gram[j][k] -= factor * gram[i][k]
    solved = [0.0] * q
    for i in reversed(range(q)):
        rest = gram[i][last] - sum(gram[i][j] * solved[j] for j in range(i + 1, q))
        solved[i] = rest / gram[i][i]
    return solved, all(gram[i][i] > SOUND * whole[i] for i in range(q, last))


def _held(theta: list[float], slope: list[float], run: Single) -> list[bool]:
    """Coordinates on a bound that the steepest descent would push across."""
    return [
        (t <= low and s < 0) or (t >= high and s > 0)
        for t, s, low, high in zip(theta, slope, run.low, run.high, strict=True)
    ]


def _sum(a: Matrix, b: Matrix) -> Matrix:
    return [[v + w for v, w in zip(x, y, strict=True)] for x, y in zip(a, b, strict=True)]


def _step(
    curvature: Matrix, slope: list[float], damping: float, held: list[bool]
) -> tuple[list[float], float]:
    """Damped step and the decrease of the sum it predicts; nan where the curvature is not positive."""
    m = range(len(slope))
    system = [
        [0.0 if held[i] or held[j] else curvature[i][j] for j in m] + [0.0 if held[i] else slope[i]]
        for i in m
    ]
    right = [row[-1] for row in system]
    raised = [damping * system[i][i] for i in m]
    for i in m:
        system[i][i] += raised[i]
        # A coordinate that is held, or that nothing depends on, stays.
        if system[i][i] == 0.0 and right[i] == 0.0:
            system[i][i] = 1.0
    step = _solved(system)
    if step is None:
        return [0.0 for _ in m], math.nan
    return step, sum(s * (g + r * s) for s, g, r in zip(step, right, raised, strict=True))


def _solved(system: Matrix) -> list[float] | None:
    """Solution of a system of which the last column is the right-hand side; None unless positive definite."""
    m = len(system)
    for i in range(m):
        pivot = system[i][i]
        if not pivot > 0.0:
            return None
        for j in range(i + 1, m):
            factor = system[i][j] / pivot
            for k in range(j, m + 1):
                system[j][k] -= factor * system[i][k]
    solved = [0.0] * m
    for i in reversed(range(m)):
        rest = system[i][m] - sum(system[i][j] * solved[j] for j in range(i + 1, m))
        solved[i] = rest / system[i][i]
    return solved


def _secant_update(second: Matrix, moved: list[float], change: list[float], normal: Matrix) -> Matrix:
    """As `stack_algebra.secant_update`."""
    m = range(len(moved))
    left = [change[i] - sum((normal[i][j] + second[i][j]) * moved[j] for j in m) for i in m]
    along = sum(a * b for a, b in zip(left, moved, strict=True))
    size = math.sqrt(sum(a * a for a in left) * sum(a * a for a in moved))
    if not abs(along) > 1e-8 * size:
        return second
    return [[second[i][j] + left[i] * left[j] / along for j in m] for i in m]


def _reach(theta: list[float], step: list[float], run: Single) -> tuple[list[float], bool]:
    """Where the step leads, shortened as a whole to stay inside the bounds, and whether it is whole."""
    trial = [t + s for t, s in zip(theta, step, strict=True)]
    if all(low <= t <= high for t, low, high in zip(trial, run.low, run.high, strict=True)):
        return trial, True
    bound = [high if s > 0 else low for s, low, high in zip(step, run.low, run.high, strict=True)]
    share = [(b - t) / s if s != 0.0 else math.inf for b, t, s in zip(bound, theta, step, strict=True)]
    shortest = min(1.0, max(min(share), 0.0))
    return [
        # Rounding must not leave a coordinate just short of the bound that stopped it.
        b if part <= shortest else t + shortest * s
        for part, b, t, s in zip(share, bound, theta, step, strict=True)
    ], shortest == 1.0


def _tangent(theta: list[float], here: Point, run: Single) -> float:
    """Norm of the residual's part in the tangent plane, held coordinates left out."""
    held = _held(theta, here.slope, run)
    predicted = _step(here.normal, here.slope, 0.0, held)[1]
    return math.sqrt(max(predicted, 0.0)) if math.isfinite(predicted) else math.inf
