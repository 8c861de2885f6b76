"""Where to start, and whether a solution is the best there is.

Every run is first solved from its data-driven start. A run is *doubtful* when that
solution did not converge, sits on a bound, or leaves more than two per cent of the
variation unexplained, and always when an asymmetry is free. Doubtful runs are solved
again from the best cells of a profiled grid (linear parameters in closed form), and with
a free asymmetry from seeded random starts as well. What this misses is measured in
tests/benchmarks.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calib.curves.levels import Levels
from calib.curves.stack_problem import Stack, StackSolution
from calib.curves.stack_solver import solve_stack

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

UNEXPLAINED = 0.02
GRID_STARTS = 3
RANDOM_STARTS = 8
SEED = 20260302
# Share of the residual that may lie in the tangent plane at a minimum (relative offset of
# Bates and Watts 1981), and what counts as rounding in noise-free data.
OFFSET_LIMIT = 1e-6
ROUNDING = 1e-12
# Two solutions are told apart when their sums differ by less than the first share, and what
# they read back by more than the second.
NEARLY_THE_SAME = 0.01
READS_DIFFERENTLY = 0.01


@dataclass(frozen=True, slots=True)
class Found:
    """Best solution of each run.

    Attributes
    ----------
    parameters : (k, R) array
    total : (R,) array
        Weighted sum of squares, pure error included.
    tangent : (R,) array
    converged : (R,) bool array
    second : mapping
        Run to the parameters (k,) of a second solution with nearly the same sum.
    """

    parameters: Array
    total: Array
    tangent: Array
    converged: Mask
    second: dict[int, Array] = field(default_factory=dict)


def weighted_stack(stack: Stack, levels: Levels, variance: Array) -> Stack:
    """The same runs with weights count/variance."""
    absent = levels.count == 0
    with np.errstate(divide="ignore", invalid="ignore"):
        root = np.sqrt(levels.count / variance)
        pure = levels.pure / variance
    if absent.any():
        root, pure = np.where(absent, 0.0, root), np.where(absent, 0.0, pure)
    return Stack(
        stack.model,
        levels.x,
        levels.filled,
        root,
        pure.sum(axis=0),
        stack.template,
        stack.free,
        stack.lower,
        stack.upper,
    )


def solve_from(stack: Stack, starts: Array) -> Found:
    """Solve every run from one start (k, R)."""
    solution = solve_stack(stack, _inside(stack, starts))
    return _found(stack, solution)


def search(stack: Stack, levels: Levels, given: dict[int, Array] | None = None) -> Found:
    """Solve every run from its data, and doubtful ones from several starts.

    Parameters
    ----------
    stack : Stack
    levels : Levels
        What the stack was made of.
    given : mapping, optional
        Start values (R,) by index of parameter, in place of the data-driven ones.
    """
    with np.errstate(all="ignore"):
        starts = stack.model.start(levels.x, levels.mean)
    for i, values in (given or {}).items():
        starts[i] = values
    return improved(stack, solve_from(stack, starts))


def improved(stack: Stack, first: Found) -> Found:
    """Solve doubtful runs again from several starts and keep the best."""
    if not stack.model.amplitude:
        return first
    again = np.flatnonzero(doubtful(stack, first))
    return _improved(stack, first, again) if again.size else first


def _inside(stack: Stack, starts: Array) -> Array:
    """Starts moved inside the bounds; what is not finite becomes something harmless."""
    p = np.where(np.isfinite(starts), starts, 1.0)
    p = np.where(stack.model.positive[:, None] & (p <= 0), 1.0, p)
    low, high = stack.lower, stack.upper
    with np.errstate(invalid="ignore", over="ignore"):
        margin = np.where(np.isfinite(high - low), 1e-9 * (high - low), 0.0)
    inside = np.clip(p, low + margin, high - margin)
    return np.where(stack.free[:, None], inside, stack.template[:, None])


def _found(stack: Stack, solution: StackSolution) -> Found:
    total = solution.total + stack.pure
    with np.errstate(invalid="ignore"):
        size = np.sqrt(np.sum((stack.root_weight * stack.y) ** 2, axis=0))
        converged = np.isfinite(total) & (solution.tangent <= OFFSET_LIMIT * np.sqrt(total) + ROUNDING * size)
    return Found(solution.parameters, total, solution.tangent, converged)


def doubtful(stack: Stack, found: Found) -> Mask:
    """Runs (R,) whose solution may not be the best there is."""
    if _asymmetry_free(stack):
        return np.ones(stack.runs, dtype=bool)
    weight = stack.root_weight**2 * np.ones_like(stack.y)
    with np.errstate(divide="ignore", invalid="ignore"):
        centre = np.sum(weight * stack.y, axis=0) / np.sum(weight, axis=0)
        variation = np.sum(weight * (stack.y - centre) ** 2, axis=0)
        left = (found.total - stack.pure) > UNEXPLAINED * variation
    return np.asarray(~found.converged | left | on_bound(stack, found.parameters))


def _asymmetry_free(stack: Stack) -> bool:
    names = stack.model.names
    return "asymmetry" in names and bool(stack.free[names.index("asymmetry")])


def on_bound(stack: Stack, parameters: Array) -> Mask:
    """Runs (R,) with a free parameter on a bound."""
    low, high = np.broadcast_arrays(stack.lower, stack.upper, parameters)[:2]
    with np.errstate(invalid="ignore"):
        near = (parameters <= low * (1.0 + 1e-6)) & np.isfinite(low) & (low > 0)
        near |= (parameters >= high * (1.0 - 1e-6)) & np.isfinite(high)
    return np.asarray(np.any(near & stack.free[:, None], axis=0))


def _improved(stack: Stack, first: Found, doubtful: NDArray[np.intp]) -> Found:
    """Solve the doubtful runs from more starts and keep the best."""
    some = stack.take(doubtful)
    starts = _more_starts(some)
    count = starts.shape[1]
    wide = some.take(np.repeat(np.arange(doubtful.size), count))
    again = solve_from(wide, starts.transpose(0, 2, 1).reshape(starts.shape[0], -1))
    total = np.vstack([first.total[doubtful], again.total.reshape(-1, count).T])
    parameters = np.concatenate(
        [
            first.parameters[:, None, doubtful],
            again.parameters.reshape(-1, doubtful.size, count).transpose(0, 2, 1),
        ],
        axis=1,
    )
    tangent = np.vstack([first.tangent[doubtful], again.tangent.reshape(-1, count).T])
    converged = np.vstack([first.converged[doubtful], again.converged.reshape(-1, count).T])
    best = _best(total, converged)
    rows = np.arange(doubtful.size)
    result = Found(first.parameters.copy(), first.total.copy(), first.tangent.copy(), first.converged.copy())
    result.parameters[:, doubtful] = parameters[:, best, rows]
    result.total[doubtful] = total[best, rows]
    result.tangent[doubtful] = tangent[best, rows]
    result.converged[doubtful] = converged[best, rows]
    result.second.update(_second_solutions(stack, doubtful, parameters, total, converged, best))
    return result


def _best(total: Array, converged: Mask) -> NDArray[np.intp]:
    """Lowest sum; of equal ones, to rounding, a converged one."""
    lowest = total.min(axis=0)
    with np.errstate(invalid="ignore"):
        equal = total <= lowest * (1.0 + 1e-12)
    return np.asarray(np.argmax(equal * (1 + converged), axis=0))


def _more_starts(stack: Stack) -> Array:
    """Start values (k, starts, R) from the grid, and seeded ones with a free asymmetry."""
    x = stack.x[:, 0] if stack.x.shape[1] == 1 else stack.x.max(axis=1)
    cells = stack.model.grid(x)
    starts = [_grid_starts(stack, cells)]
    if _asymmetry_free(stack):
        drawn = _random_cells(cells)
        starts.append(np.repeat(drawn.T[:, :, None], stack.runs, axis=2))
    nonlinear = np.concatenate(starts, axis=1)
    full = np.ones((stack.free.size, nonlinear.shape[1], stack.runs))
    full[~stack.model.linear] = nonlinear
    return full


def _random_cells(cells: Array) -> Array:
    """Seeded cells, log-uniform over the extent of the grid; the same for every run."""
    generator = np.random.default_rng(SEED)
    low, high = np.log(cells.min(axis=0)), np.log(cells.max(axis=0))
    return np.asarray(np.exp(low + generator.random((RANDOM_STARTS, cells.shape[1])) * (high - low)))


def _grid_starts(stack: Stack, cells: Array) -> Array:
    """Nonlinear values (q, starts, R) of the cells that explain each run best."""
    left = np.empty((cells.shape[0], stack.runs))
    shared = stack.x.shape[1] == 1 and stack.root_weight.shape[1] == 1
    for part in _parts(stack.runs, shared):
        left[:, part] = _unexplained(stack.take(part), cells)
    keep = min(GRID_STARTS, cells.shape[0])
    best = np.argpartition(left, keep - 1, axis=0)[:keep]
    best = np.take_along_axis(best, np.argsort(np.take_along_axis(left, best, axis=0), axis=0), axis=0)
    return np.asarray(cells.T[:, best])


def _parts(runs: int, shared: bool) -> list[slice]:
    """Chunks that keep the profiled grid flat in memory."""
    size = 2048 if shared else 64
    return [slice(i, i + size) for i in range(0, runs, size)]


def _unexplained(stack: Stack, cells: Array) -> Array:
    """Weighted sum of squares (cells, R) with the linear parameters at their best.

    Where the runs share concentrations and weights, one orthogonal basis a cell serves them all.
    """
    model, linear = stack.model, stack.model.linear
    columns: list[Array | float] = [0.0] * len(model.names)
    for row, i in zip(cells.T, np.flatnonzero(~linear), strict=True):
        columns[i] = row[:, None, None] if stack.free[i] else float(stack.template[i])
    weight = stack.root_weight.T[None]
    with np.errstate(all="ignore"):
        derivatives = model.derivatives(stack.x.T[None], columns)
        rest = stack.y.T[None]
        for i in np.flatnonzero(linear & ~stack.free):
            rest = rest - stack.template[i] * derivatives[i]
        rest = weight * rest
        left = np.sum(rest**2, axis=-1)
        orthogonal: list[Array] = []
        for i in np.flatnonzero(linear & stack.free):
            v = weight * derivatives[i]
            for q in orthogonal:
                v = v - np.sum(q * v, axis=-1, keepdims=True) * q
            length = np.sqrt(np.sum(v**2, axis=-1, keepdims=True))
            q = np.where(length > 0, v / length, 0.0)
            orthogonal.append(q)
            left = left - _projection(q, rest) ** 2
    return np.where(np.isfinite(left), left, np.inf) * np.ones((cells.shape[0], stack.runs))


def _projection(q: Array, rest: Array) -> Array:
    """Products (cells, R) of unit vectors (cells, 1 or R, n) and residuals (1 or cells, R, n)."""
    if q.shape[1] == 1 and rest.shape[0] == 1:
        return np.asarray(q[:, 0] @ rest[0].T)
    return np.asarray(np.sum(q * rest, axis=-1))


def _second_solutions(
    stack: Stack,
    doubtful: NDArray[np.intp],
    parameters: Array,
    total: Array,
    converged: Mask,
    best: NDArray[np.intp],
) -> dict[int, Array]:
    """Distinct minima of nearly the same sum that read the standards back differently."""
    second: dict[int, Array] = {}
    rows = np.arange(doubtful.size)
    lowest = total[best, rows]
    with np.errstate(invalid="ignore"):
        rival = converged & (total <= lowest * (1.0 + NEARLY_THE_SAME)) & (total > lowest * (1.0 + 1e-9))
    for column in np.flatnonzero(rival.any(axis=0)):
        x = stack.x[:, 0] if stack.x.shape[1] == 1 else stack.x[:, doubtful[column]]
        p = parameters[:, best[column], column]
        for j in np.flatnonzero(rival[:, column]):
            other = parameters[:, j, column]
            if reads_differently(stack, x, p, other) > READS_DIFFERENTLY:
                second[int(doubtful[column])] = other
                break
    return second


def reads_differently(stack: Stack, x: Array, p: Array, other: Array) -> float:
    """Largest relative difference of what two curves read from the fitted responses."""
    inside = x[x > 0]
    with np.errstate(all="ignore"):
        found = stack.model.inverse(stack.model.response(inside, p), other) / inside - 1.0
    return float(np.max(np.where(np.isfinite(found), np.abs(found), np.inf), initial=0.0))
