"""Weighted nonlinear least squares over a stack of runs: one loop for all of them.

Parameters in which the response is linear are eliminated in closed form at every step (Golub
and Pereyra 1973, with the exact projection of Ruhe and Wedin 1980), so that only the one to
three others are searched, positive ones in their logarithm. Steps are Gauss–Newton, damped
(Levenberg 1944, Marquardt 1963) only after a step that failed. A step that would cross a bound
is shortened as a whole; a parameter that sits on its bound and pushes outwards is held there.
Close to the minimum the normal matrix is completed by secant updates of the part that second
derivatives add (Dennis, Gay and Welsch 1981), which spares a quarter of the steps. A run stops
when the predicted decrease no longer matters, after one last full step, and leaves the stack.
Runs too close to singular for the quick evaluation go on with the careful one (`stack_points`).
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from calib.curves.single_solver import End, Single, solve_single
from calib.curves.stack_algebra import damped_step, held_at_bound, reach, secant_update
from calib.curves.stack_points import Point, careful_point, either, quick_point
from calib.curves.stack_problem import Stack, StackSolution, some, unsolved
from calib.curves.stack_roles import Roles, Rules, roles_of

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Rows = NDArray[np.intp]
Evaluate = Callable[[Stack, Roles, Array, Array], Point]

# Runs, and readings, solved at once: enough to make array operations cheap, few enough to stay in cache.
CHUNK, READINGS = 4096, 100_000
RULES = Rules()
# Up to so many runs are solved one after the other on plain vectors.
FEW = 6
# Leave the stack when so large a part of it is finished: copying costs less than carrying on.
LEAVE_SHARE = 0.125


def solve_stack(stack: Stack, starts: Array) -> StackSolution:
    """Minimise the weighted sum of squares of every run.

    Parameters
    ----------
    stack : Stack
        Of a model whose derivatives are proportional to one amplitude (all built-in ones).
    starts : (k, R) array
        Start values in natural coordinates, inside the bounds.

    Returns
    -------
    StackSolution
        Runs that cannot be evaluated at their start keep it, with an infinite total.
    """
    roles = _roles(stack)
    found = unsolved(starts)
    with np.errstate(all="ignore"):
        if stack.runs <= FEW:
            left = _solve_few(stack, roles, found)
        else:
            parts = _chunks(np.arange(stack.runs), stack)
            left = np.concatenate([_solve(quick_point, stack, roles, found, rows) for rows in parts])
        for rows in _chunks(left, stack):
            _solve(careful_point, stack, roles, found, rows)
    return found


def _chunks(rows: Rows, stack: Stack) -> list[Rows]:
    size = max(min(CHUNK, READINGS // stack.y.shape[0]), 1)
    return [rows[i : i + size] for i in range(0, rows.size, size)]


def _roles(stack: Stack) -> Roles:
    unbounded = np.all(np.isneginf(stack.lower), axis=1) & np.all(np.isposinf(stack.upper), axis=1)
    return roles_of(stack.model, tuple(stack.free.tolist()), tuple(unbounded.tolist()))


def _solve_few(stack: Stack, roles: Roles, found: StackSolution) -> Rows:
    """Solve one run after the other; the rows that did not settle."""
    theta = _coordinates(roles, found.parameters)
    low, high = _limits(stack, roles)
    left = []
    for i in range(stack.runs):
        before = found.parameters[list(roles.eliminated), i].tolist()
        end = solve_single(_single(stack, i, low, high), roles, RULES, theta[:, i].tolist(), before)
        if math.isfinite(end.point.total):
            _write_single(found, i, end, stack, roles)
        if not end.settled:
            left.append(i)
    return np.array(left, dtype=np.intp)


def _single(stack: Stack, i: int, low: Array, high: Array) -> Single:
    def column(values: Array) -> Array:
        return values[:, 0] if values.shape[1] == 1 else np.ascontiguousarray(values[:, i])

    return Single(
        stack.model,
        column(stack.x),
        column(stack.y),
        column(stack.root_weight),
        float(stack.pure[i]),
        stack.template.tolist(),
        column(low).tolist(),
        column(high).tolist(),
    )


def _write_single(found: StackSolution, i: int, end: End, stack: Stack, roles: Roles) -> None:
    p = stack.template.tolist()
    for value, j in zip(end.point.linear, roles.eliminated, strict=True):
        p[j] = value
    for value, j, log in zip(end.theta, roles.searched, roles.in_logarithm, strict=True):
        p[j] = math.exp(value) if log else value
    found.parameters[:, i] = p
    found.total[i], found.tangent[i], found.steps[i] = end.point.total, end.tangent, end.steps


def _solve(evaluate: Evaluate, stack: Stack, roles: Roles, found: StackSolution, index: Rows) -> Rows:
    """Iterate until every run of ``index`` is finished; the rows that did not settle."""
    stack = stack.take(index)
    start = found.parameters.take(index, axis=-1)
    theta = _coordinates(roles, start)
    low, high = _limits(stack, roles)
    floor = RULES.floor * stack.size
    here = evaluate(stack, roles, theta, start[list(roles.eliminated)])
    if not here.exact.all():
        here = evaluate(stack, roles, theta, here.linear)
    damping = np.zeros(stack.runs)
    second = np.zeros_like(here.normal)
    recorded = np.zeros(stack.runs, dtype=bool)
    left: list[Rows] = []
    for count in range(1, RULES.steps + 1):
        held = held_at_bound(theta, here.slope, low, high)
        step, predicted = damped_step(here.normal + second, here.slope, damping, held)
        astray = ~(predicted >= 0.0)
        if astray.any() and second[:, :, astray].any():
            # The completed matrix leads uphill: do without.
            second[:, :, astray] = 0.0
            step, predicted = damped_step(here.normal + second, here.slope, damping, held)
        trial, whole = reach(theta, step, low, high)
        there = evaluate(stack, roles, trial, here.linear)
        # Close to the minimum the sums no longer tell two points apart; the step still does.
        total = here.total + stack.pure
        close = predicted <= RULES.close * total + floor
        usable = np.isfinite(here.total)
        taken = usable & (
            (there.total < here.total) | (close & (there.total <= here.total * (1.0 + RULES.close) + floor))
        )
        plain = whole & (damping == 0.0)
        enough = usable & (predicted <= RULES.enough * total + floor)
        last = enough & plain
        settled = last | (enough & taken)
        lost = ~usable | (damping >= RULES.most_damping) | (predicted <= 0.0)
        if evaluate is quick_point:
            lost |= ~np.isfinite(there.total)
        near = taken & plain & (predicted <= RULES.near * total)
        if near.any():
            second = secant_update(second, trial - theta, here.slope - there.slope, there.normal, near)
        else:
            second = np.zeros_like(second)
        if taken.all():
            theta, here = trial, there
        else:
            theta, here = np.where(taken, trial, theta), either(taken, there, here)
        damping = _next_damping(damping, taken)
        done = (settled | lost) & ~recorded if count < RULES.steps else ~recorded
        if not done.any():
            continue
        rows = np.flatnonzero(done)
        _record(found, index[rows], roles, theta.take(rows, axis=-1), here.take(rows), count)
        # An undamped last step leaves less in the tangent plane than it predicted.
        found.tangent[index[rows]] = np.sqrt(np.maximum(predicted[rows], 0.0))
        rows = rows[~last[rows]]
        if rows.size:
            found.tangent[index[rows]] = _tangent(
                here.take(rows), theta[:, rows], some(low, rows), some(high, rows)
            )
        if count < RULES.steps:
            left.append(index[rows[~settled[rows]]])
        recorded |= done
        if recorded.all():
            break
        if recorded.sum() < LEAVE_SHARE * recorded.size:
            continue
        # Finished runs are recorded once; the others go on without them.
        keep = np.flatnonzero(~recorded)
        index, theta, damping, floor = index[keep], theta.take(keep, axis=-1), damping[keep], floor[keep]
        stack, here, recorded = stack.take(keep), here.take(keep), recorded[keep]
        low, high, second = some(low, keep), some(high, keep), second.take(keep, axis=-1)
    return np.concatenate(left) if left else np.empty(0, dtype=np.intp)


def _tangent(here: Point, theta: Array, low: Array, high: Array) -> Array:
    """Norm of the residual's part in the tangent plane, coordinates held at a bound left out."""
    held = held_at_bound(theta, here.slope, low, high)
    _, predicted = damped_step(here.normal, here.slope, np.zeros(theta.shape[1]), held)
    return np.sqrt(np.maximum(predicted, 0.0))


def _coordinates(roles: Roles, p: Array) -> Array:
    """Searched coordinates (m, R) of full parameters (k, R)."""
    rows = [np.log(p[i]) if log else p[i] for i, log in zip(roles.searched, roles.in_logarithm, strict=True)]
    return np.array(rows) if rows else np.empty((0, p.shape[1]))


def _limits(stack: Stack, roles: Roles) -> tuple[Array, Array]:
    low, high = stack.lower[list(roles.searched)], stack.upper[list(roles.searched)]
    log = np.array(roles.in_logarithm, dtype=bool)[:, None]
    return np.where(log, np.log(np.maximum(low, 0.0)), low), np.where(
        log, np.log(np.maximum(high, 0.0)), high
    )


def _next_damping(damping: Array, taken: Mask) -> Array:
    """Ten times less after a good step, none once it is small; ten times more after a bad one."""
    if taken.all() and not damping.any():
        return damping
    less = np.where(damping > RULES.no_damping, damping * 0.1, 0.0)
    return np.where(taken, less, np.maximum(damping * 10.0, RULES.first_damping))


def _record(found: StackSolution, rows: Rows, roles: Roles, theta: Array, here: Point, count: int) -> None:
    """Write finished runs into the solution; what cannot be evaluated keeps its start."""
    finite = np.isfinite(here.total)
    if not finite.all():
        rows, theta, here = rows[finite], theta[:, finite], here.take(np.flatnonzero(finite))
    for row, i in zip(here.linear, roles.eliminated, strict=True):
        found.parameters[i, rows] = row
    for row, i, log in zip(theta, roles.searched, roles.in_logarithm, strict=True):
        found.parameters[i, rows] = np.exp(row) if log else row
    found.total[rows] = here.total
    found.steps[rows] += count
