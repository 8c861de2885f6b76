"""Where to start, and whether a solution is the best there is.

Every run is first solved from its data-driven start. A run is *doubtful* when that
solution did not converge, sits on a bound, or leaves more than two per cent of the
variation unexplained, and always when an asymmetry is free. Doubtful runs are solved
again from the deepest minima of a profiled grid (linear parameters in closed form). With
a free asymmetry, seeded random starts follow unless all of these met in one minimum. What
this misses is measured in tests/benchmarks.
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
# Sums of one minimum reached from two starts, and a sum by the solver and by the formula.
SAME = 1e-9
SAME_BY_FORMULA = 1e-6
# Runs that are searched at once.
CHUNK = 2048


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

    def take(self, which: NDArray[np.intp]) -> Found:
        """Some of the runs, without their second solutions."""
        parameters = self.parameters.take(which, axis=-1)
        return Found(parameters, self.total[which], self.tangent[which], self.converged[which])


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


def _improved(stack: Stack, first: Found, which: NDArray[np.intp]) -> Found:
    """Solve some of the runs from more starts and keep the best, a chunk at a time."""
    result = Found(first.parameters.copy(), first.total.copy(), first.tangent.copy(), first.converged.copy())
    for i in range(0, which.size, CHUNK):
        runs = which[i : i + CHUNK]
        some = stack.take(runs)
        ends = _ends(some, first.take(runs))
        best = _best(ends)
        rows = np.arange(runs.size)
        result.parameters[:, runs] = ends.parameters[:, best, rows]
        for name in ("total", "tangent", "converged"):
            getattr(result, name)[runs] = getattr(ends, name)[best, rows]
        second = _second_solutions(some, ends, best)
        result.second.update({int(runs[j]): other for j, other in second.items()})
    return result


@dataclass(frozen=True, slots=True)
class _Ends:
    """Where S starts of R runs ended: parameters (k, S, R), the others (S, R); sums infinite where unused."""

    parameters: Array
    total: Array
    tangent: Array
    converged: Mask


def _ends(stack: Stack, first: Found) -> _Ends:
    """Ends from the data, from the minima of the grid, and where these differ from seeded cells."""
    x = stack.x[:, 0] if stack.x.shape[1] == 1 else stack.x.max(axis=1)
    cells = stack.model.grid(x)
    grid, wanted = _grid_starts(stack, cells)
    drawn = _random_cells(cells) if _asymmetry_free(stack) else cells[:0]
    shape = (1 + grid.shape[1] + drawn.shape[0], stack.runs)
    ends = _Ends(
        np.ones((stack.free.size, *shape)),
        np.full(shape, np.inf),
        np.full(shape, np.inf),
        np.zeros(shape, bool),
    )
    ends.parameters[:, 0], ends.total[0] = first.parameters, first.total
    ends.tangent[0], ends.converged[0] = first.tangent, first.converged
    last = 1 + grid.shape[1]
    ends.parameters[~stack.model.linear, 1:last] = grid
    _solve_starts(stack, ends, np.arange(1, last), wanted)
    if drawn.size:
        ends.parameters[~stack.model.linear, last:] = drawn.T[:, :, None]
        apart = np.broadcast_to(~_agreed(ends, last), (drawn.shape[0], stack.runs))
        _solve_starts(stack, ends, np.arange(last, shape[0]), apart)
    _refuse_rounding(stack, ends)
    return ends


def _solve_starts(stack: Stack, ends: _Ends, starts: NDArray[np.intp], wanted: Mask) -> None:
    """Solve the wanted ones (starts, R) of some starts and put their ends in their place."""
    which, runs = np.nonzero(wanted)
    if runs.size == 0:
        return
    place = starts[which]
    found = solve_from(stack.take(runs), ends.parameters[:, place, runs])
    ends.parameters[:, place, runs] = found.parameters
    ends.total[place, runs], ends.tangent[place, runs] = found.total, found.tangent
    ends.converged[place, runs] = found.converged


def _agreed(ends: _Ends, count: int) -> Mask:
    """Runs (R,) of which the first so many starts, as far as they were used, met in one minimum."""
    total, converged = ends.total[:count], ends.converged[:count]
    used = np.isfinite(total)
    lowest = total.min(axis=0)
    with np.errstate(invalid="ignore"):
        same = converged & (total <= lowest * (1.0 + SAME))
    return np.asarray((same | ~used).all(axis=0) & (used.sum(axis=0) > 1))


def _refuse_rounding(stack: Stack, ends: _Ends) -> None:
    """Make sums infinite that the parameters themselves do not give.

    On the way to infinity two terms of the curve may grow until their difference is rounding.
    """
    size = np.sum((stack.root_weight * stack.y) ** 2, axis=0)
    for p, total in zip(ends.parameters.transpose(1, 0, 2), ends.total, strict=True):
        with np.errstate(all="ignore"):
            misfit = stack.root_weight * (stack.model.response(stack.x, list(p)) - stack.y)
            again = np.sum(misfit**2, axis=0) + stack.pure
            given = again <= total * (1.0 + SAME_BY_FORMULA) + ROUNDING**2 * size
        total[~given] = np.inf


def _best(ends: _Ends) -> NDArray[np.intp]:
    """Lowest sum; of equal ones, to rounding, a converged one."""
    lowest = ends.total.min(axis=0)
    with np.errstate(invalid="ignore"):
        equal = ends.total <= lowest * (1.0 + 1e-12)
    return np.asarray(np.argmax(equal * (1 + ends.converged), axis=0))


def _random_cells(cells: Array) -> Array:
    """Seeded cells, log-uniform over the extent of the grid; the same for every run."""
    generator = np.random.default_rng(SEED)
    low, high = np.log(cells.min(axis=0)), np.log(cells.max(axis=0))
    return np.asarray(np.exp(low + generator.random((RANDOM_STARTS, cells.shape[1])) * (high - low)))


def _grid_starts(stack: Stack, cells: Array) -> tuple[Array, Mask]:
    """Nonlinear values (q, starts, R) of the deepest minima of the profiled grid, and which there are.

    A cell is a minimum when none of its neighbours along an axis explains more; the best three
    cells would often lie side by side in one valley.
    """
    left = np.empty((cells.shape[0], stack.runs))
    shared = stack.x.shape[1] == 1 and stack.root_weight.shape[1] == 1
    for part in _parts(stack.runs, shared):
        left[:, part] = _unexplained(stack.take(np.arange(stack.runs)[part]), cells)
    depth = np.where(_minima(left, cells), left, np.inf)
    keep = min(GRID_STARTS, cells.shape[0])
    best = np.argsort(depth, axis=0, kind="stable")[:keep]
    return np.asarray(cells.T[:, best]), np.isfinite(np.take_along_axis(depth, best, axis=0))


def _minima(left: Array, cells: Array) -> Mask:
    """Which cells (cells, R) of a lattice are lower than or level with their neighbours."""
    shape = tuple(np.unique(axis).size for axis in cells.T)
    lattice = left.reshape(*shape, left.shape[1])
    minimum = np.ones(lattice.shape, dtype=bool)
    for axis in range(len(shape)):
        along, here = np.moveaxis(minimum, axis, 0), np.moveaxis(lattice, axis, 0)
        along[:-1] &= here[:-1] <= here[1:]
        along[1:] &= here[1:] <= here[:-1]
    return minimum.reshape(left.shape)


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


def _second_solutions(stack: Stack, ends: _Ends, best: NDArray[np.intp]) -> dict[int, Array]:
    """Distinct minima of nearly the same sum that read the standards back differently."""
    second: dict[int, Array] = {}
    lowest = ends.total[best, np.arange(best.size)]
    with np.errstate(invalid="ignore"):
        rival = (
            ends.converged
            & (ends.total <= lowest * (1.0 + NEARLY_THE_SAME))
            & (ends.total > lowest * (1.0 + SAME))
        )
    for run in np.flatnonzero(rival.any(axis=0)):
        x = stack.x[:, 0] if stack.x.shape[1] == 1 else stack.x[:, run]
        p = ends.parameters[:, best[run], run]
        for j in np.flatnonzero(rival[:, run]):
            other = ends.parameters[:, j, run]
            if reads_differently(stack, x, p, other) > READS_DIFFERENTLY:
                second[int(run)] = other
                break
    return second


def reads_differently(stack: Stack, x: Array, p: Array, other: Array) -> float:
    """Largest relative difference of what two curves read from the fitted responses."""
    inside = x[x > 0]
    with np.errstate(all="ignore"):
        found = stack.model.inverse(stack.model.response(inside, p), other) / inside - 1.0
    return float(np.max(np.where(np.isfinite(found), np.abs(found), np.inf), initial=0.0))
