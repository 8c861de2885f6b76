"""Weighted nonlinear least squares over a stack of runs: one loop for all of them.

Arrays have the readings of a run along the first axis and the runs along the last,
contiguous one. Parameters in which the response is linear are eliminated in closed form at
every step (Golub and Pereyra 1973, with the exact projection of Ruhe and Wedin 1980), so
that only the one to three others are searched, positive ones in their logarithm. Steps are
Gauss–Newton, damped (Levenberg 1944, Marquardt 1963) only after a step that failed. A step
that would cross a bound is shortened as a whole; a parameter that sits on its bound and
pushes outwards is held there. A run stops when the predicted decrease no longer matters,
after one last full step, and leaves the stack.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from calib.curves.single_solver import End, Single, solve_single
from calib.curves.stack_algebra import (
    back_substitute,
    damped_step,
    dot,
    filling,
    held_at_bound,
    orthogonalise,
    project_out,
    reach,
)
from calib.curves.stack_roles import Roles, Rules, roles_of
from calib.models import ResponseModel

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

CHUNK = 4096
RULES = Rules()
# Up to so many runs are solved one after the other on plain vectors.
FEW = 6
# Leave the stack when so large a part of it is finished: copying costs less than carrying on.
LEAVE_SHARE = 0.125


@dataclass(frozen=True, slots=True)
class Stack:
    """R runs of n readings (or of n levels with replicates collapsed).

    Attributes
    ----------
    x : (n, 1) or (n, R) array
    y : (n, R) array
        0 where a reading is absent.
    root_weight : (n, 1) or (n, R) array
        Square roots of the weights; 0 where a reading is absent.
    pure : (R,) array
        Weighted pure-error sum that collapsing left behind.
    template : (k,) array
        Values of fixed parameters.
    free : (k,) bool array
    lower, upper : (k, 1) or (k, R) arrays
    """

    model: ResponseModel
    x: Array
    y: Array
    root_weight: Array
    pure: Array
    template: Array
    free: Mask
    lower: Array
    upper: Array

    @property
    def runs(self) -> int:
        """Number of runs."""
        return int(self.y.shape[-1])

    def take(self, which: NDArray[np.intp] | slice) -> Stack:
        """Some of the runs."""
        return replace(
            self,
            x=_some(self.x, which),
            y=self.y[:, which],
            root_weight=_some(self.root_weight, which),
            pure=self.pure[which],
            lower=_some(self.lower, which),
            upper=_some(self.upper, which),
        )


@dataclass(frozen=True, slots=True)
class StackSolution:
    """Where each run of a stack ended.

    Attributes
    ----------
    parameters : (k, R) array
    total : (R,) array
        Weighted sum of squares without the pure error.
    tangent : (R,) array
        Norm of the residual's part in the tangent plane; 0 at an exact minimum.
    steps : (R,) int array
    """

    parameters: Array
    total: Array
    tangent: Array
    steps: NDArray[np.intp]


@dataclass(frozen=True, slots=True)
class _Point:
    """A stack evaluated at searched coordinates."""

    residual: Array
    total: Array
    linear: Array
    tangents: Sequence[Array]


def solve_stack(stack: Stack, starts: Array) -> StackSolution:
    """Minimise the weighted sum of squares of every run.

    Parameters
    ----------
    stack : Stack
        Of a model whose derivatives are proportional to one amplitude (all built-in ones).
    starts : (k, R) array
        Start values in natural coordinates, inside the bounds; those of eliminated
        parameters are not used.

    Returns
    -------
    StackSolution
        Runs that cannot be evaluated at their start keep it, with an infinite total.
    """
    roles = _roles(stack)
    if stack.runs <= FEW:
        return _solve_few(stack, roles, starts)
    parts = [
        _solve_chunk(stack.take(slice(i, i + CHUNK)), roles, starts[:, i : i + CHUNK])
        for i in range(0, stack.runs, CHUNK)
    ]
    if len(parts) == 1:
        return parts[0]
    return StackSolution(
        np.concatenate([p.parameters for p in parts], axis=1),
        np.concatenate([p.total for p in parts]),
        np.concatenate([p.tangent for p in parts]),
        np.concatenate([p.steps for p in parts]),
    )


def _some(values: Array, which: NDArray[np.intp] | slice) -> Array:
    return values if values.shape[-1] == 1 else values[:, which]


def _roles(stack: Stack) -> Roles:
    unbounded = np.all(np.isneginf(stack.lower), axis=1) & np.all(np.isposinf(stack.upper), axis=1)
    return roles_of(stack.model, tuple(stack.free.tolist()), tuple(unbounded.tolist()))


def _solve_few(stack: Stack, roles: Roles, starts: Array) -> StackSolution:
    """The same steps, one run after the other."""
    runs = stack.runs
    found = StackSolution(
        np.array(starts, dtype=np.float64),
        np.full(runs, np.inf),
        np.full(runs, np.inf),
        np.zeros(runs, dtype=np.intp),
    )
    with np.errstate(all="ignore"):
        theta = _coordinates(roles, starts)
        low, high = _limits(stack, roles)
        for i in range(runs):
            end = solve_single(_single(stack, i, low, high), roles, RULES, theta[:, i].tolist())
            _write_single(found, i, end, stack, roles)
    return found


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


def _solve_chunk(stack: Stack, roles: Roles, starts: Array) -> StackSolution:
    """Iterate until every run of the chunk is finished."""
    runs = stack.runs
    found = StackSolution(
        np.array(starts, dtype=np.float64),
        np.full(runs, np.inf),
        np.full(runs, np.inf),
        np.zeros(runs, dtype=np.intp),
    )
    with np.errstate(all="ignore"):
        floor = RULES.floor * np.sum((stack.root_weight * stack.y) ** 2, axis=0)
        _iterate(stack, roles, _coordinates(roles, starts), floor, found)
    return found


def _iterate(stack: Stack, roles: Roles, theta: Array, floor: Array, found: StackSolution) -> None:
    index = np.arange(stack.runs)
    low, high = _limits(stack, roles)
    here = _evaluate(stack, roles, theta)
    damping = np.zeros(stack.runs)
    recorded = np.zeros(stack.runs, dtype=bool)
    for count in range(1, RULES.steps + 1):
        normal, slope = _normal_equations(here)
        step, predicted = damped_step(normal, slope, damping, held_at_bound(theta, slope, low, high))
        share = reach(theta, step, low, high)
        trial = theta + share * step
        there = _evaluate(stack, roles, trial)
        # Close to the minimum the sums no longer tell two points apart; the step still does.
        total = here.total + stack.pure
        close = predicted <= RULES.close * total + floor
        taken = (there.total < here.total) | (
            close & (there.total <= here.total * (1.0 + RULES.close) + floor)
        )
        enough = predicted <= RULES.enough * total + floor
        last = enough & (damping == 0.0) & (share == 1.0)
        stuck = damping >= RULES.most_damping
        done = last | (enough & taken) | stuck | ~np.isfinite(here.total) | (predicted <= 0.0)
        theta, here = _accept(taken, trial, theta, there, here)
        damping = _next_damping(damping, taken)
        if count == RULES.steps:
            done[:] = True
        done &= ~recorded
        if not done.any():
            continue
        _record(found, index, done, stack, roles, theta, here, count)
        # An undamped last step leaves less in the tangent plane than it predicted.
        found.tangent[index[done]] = np.sqrt(np.maximum(predicted[done], 0.0))
        open_end = done & ~last
        if open_end.any():
            rows = np.flatnonzero(open_end)
            found.tangent[index[rows]] = _tangent(
                _take(here, rows), theta[:, rows], _some(low, rows), _some(high, rows)
            )
        recorded |= done
        if recorded.all():
            return
        if recorded.sum() < LEAVE_SHARE * recorded.size:
            continue
        # Finished runs are recorded once; the others go on without them.
        keep = np.flatnonzero(~recorded)
        index, theta, damping, floor = index[keep], theta[:, keep], damping[keep], floor[keep]
        stack, here, recorded = stack.take(keep), _take(here, keep), recorded[keep]
        low, high = _some(low, keep), _some(high, keep)


def _tangent(here: _Point, theta: Array, low: Array, high: Array) -> Array:
    """Norm of the residual's part in the tangent plane, coordinates held at a bound left out."""
    normal, slope = _normal_equations(here)
    held = held_at_bound(theta, slope, low, high)
    step, _ = damped_step(normal, slope, np.zeros(theta.shape[1]), held)
    return np.asarray(np.sqrt(np.maximum(np.einsum("ir,ir->r", step, np.where(held, 0.0, slope)), 0.0)))


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


def _natural(roles: Roles, stack: Stack, theta: Array) -> list[Array | float]:
    """Parameters for the model: searched values, fixed values, unit amplitude."""
    p: list[Array | float] = [
        float(u) if linear else float(t)
        for u, t, linear in zip(roles.unit, stack.template, stack.model.linear, strict=True)
    ]
    for row, i, log in zip(theta, roles.searched, roles.in_logarithm, strict=True):
        if not stack.model.linear[i]:
            p[i] = np.exp(row) if log else row
    return p


def _evaluate(stack: Stack, roles: Roles, theta: Array) -> _Point:
    """Residual, linear parameters and the tangents of the searched ones, all projected."""
    p = _natural(roles, stack, theta)
    derivative = stack.model.derivatives(stack.x, p)
    weight = stack.root_weight
    linear: dict[int, Array | float] = {}
    rest = stack.y
    for i in roles.held_linear:
        linear[i] = theta[roles.searched.index(i)] if i in roles.searched else float(stack.template[i])
        rest = rest - linear[i] * derivative[i]
    residual = weight * rest
    basis = [filling(weight * derivative[i], residual) for i in roles.eliminated]
    orthogonal, triangle = orthogonalise(basis)
    parts = [dot(q, residual) for q in orthogonal]
    for q, part in zip(orthogonal, parts, strict=True):
        residual = residual - part * q
    solved = back_substitute(triangle, parts)
    linear.update(zip(roles.eliminated, solved, strict=True))
    amplitude = sum((w * linear[i] for i, w in roles.amplitude), start=np.zeros(()))
    tangents = []
    for i, log in zip(roles.searched, roles.in_logarithm, strict=True):
        if stack.model.linear[i]:
            tangent = weight * derivative[i]
        else:
            tangent = (weight * derivative[i]) * (amplitude * p[i] if log else amplitude)
        tangents.append(project_out(filling(tangent, residual), orthogonal))
    kept = np.array(solved) if solved else np.empty((0, residual.shape[1]))
    return _Point(residual, dot(residual, residual), kept, tangents)


def _normal_equations(here: _Point) -> tuple[Array, Array]:
    """J'J (m, m, R) and J'r (m, R) of the searched coordinates."""
    m = len(here.tangents)
    normal = np.empty((m, m, here.total.size))
    slope = np.empty((m, here.total.size))
    for i, a in enumerate(here.tangents):
        slope[i] = dot(a, here.residual)
        for j in range(i, m):
            normal[i, j] = normal[j, i] = dot(a, here.tangents[j])
    return normal, slope


def _accept(taken: Mask, trial: Array, theta: Array, there: _Point, here: _Point) -> tuple[Array, _Point]:
    if taken.all():
        return trial, there
    return np.where(taken, trial, theta), _Point(
        np.where(taken, there.residual, here.residual),
        np.where(taken, there.total, here.total),
        np.where(taken, there.linear, here.linear),
        [np.where(taken, a, b) for a, b in zip(there.tangents, here.tangents, strict=True)],
    )


def _next_damping(damping: Array, taken: Mask) -> Array:
    """Ten times less after a good step, none once it is small; ten times more after a bad one."""
    less = np.where(damping > RULES.no_damping, damping * 0.1, 0.0)
    return np.where(taken, less, np.maximum(damping * 10.0, RULES.first_damping))


def _take(here: _Point, keep: NDArray[np.intp]) -> _Point:
    return _Point(
        here.residual[:, keep],
        here.total[keep],
        here.linear[:, keep],
        [t[:, keep] for t in here.tangents],
    )


def _record(
    found: StackSolution,
    index: NDArray[np.intp],
    done: Mask,
    stack: Stack,
    roles: Roles,
    theta: Array,
    here: _Point,
    count: int,
) -> None:
    """Write the finished runs into the solution."""
    rows = index[done]
    found.parameters[np.ix_(~stack.free, rows)] = stack.template[~stack.free][:, None]
    for row, i in zip(here.linear, roles.eliminated, strict=True):
        found.parameters[i, rows] = row[done]
    for row, i, log in zip(theta, roles.searched, roles.in_logarithm, strict=True):
        found.parameters[i, rows] = np.exp(row[done]) if log else row[done]
    found.total[rows] = np.where(np.isfinite(here.total[done]), here.total[done], np.inf)
    found.steps[rows] = count
