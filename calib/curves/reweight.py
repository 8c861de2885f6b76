"""Curves and their weights together: iteratively reweighted least squares over a stack."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from calib.curves.levels import Levels
from calib.curves.noise import NoiseModel, of_runs
from calib.curves.search import Found, improved, search, solve_from, weighted_stack
from calib.curves.stack_problem import Stack, some

Array = NDArray[np.float64]

PASSES = 60
# Fitted means stand still when they move by less than this share of the largest response.
SETTLED = 1e-11


@dataclass(frozen=True, slots=True)
class Settled:
    """Solutions with the weights they belong to.

    Attributes
    ----------
    found : Found
    stable : (R,) bool array
        False where the means did not settle while the weights followed them.
    """

    found: Found
    stable: NDArray[np.bool_]


def solve_with_noise(
    stack: Stack, levels: Levels, noise: NoiseModel, starts: Array | dict[int, Array]
) -> Settled:
    """Solve every run under a noise model that is bound to its responses.

    Parameters
    ----------
    stack : Stack
        Model, fixed values and bounds; its readings and weights are replaced.
    levels : Levels
    noise : NoiseModel
    starts : (k, R) array or mapping
        All start values, or those that replace data-driven ones by index of parameter.
    """
    if not noise.follows_fit:
        found = _solved(weighted_stack(stack, levels, _at(noise, levels.filled, levels)), levels, starts)
        return Settled(found, np.ones(levels.runs, dtype=bool))
    first = _solved(weighted_stack(stack, levels, np.ones((1, 1))), levels, starts)
    return _follow(stack, levels, noise, first, isinstance(starts, dict))


def _solved(stack: Stack, levels: Levels, starts: Array | dict[int, Array]) -> Found:
    return search(stack, levels, starts) if isinstance(starts, dict) else solve_from(stack, starts)


def _at(noise: NoiseModel, mean: Array, levels: Levels) -> Array:
    return noise.at_standards(mean, np.broadcast_to(levels.x, mean.shape))


def _follow(stack: Stack, levels: Levels, noise: NoiseModel, first: Found, searching: bool) -> Settled:
    """Refit with weights at the fitted means; runs leave as their means stand still."""
    found = replace(first, second={})
    stable = np.zeros(levels.runs, dtype=bool)
    index = np.arange(levels.runs)
    size = np.max(np.abs(levels.filled), axis=0)
    size = np.where(size > 0, size, 1.0)
    mean = _mean(stack, levels, found.parameters)
    now, part, some = noise, levels, stack
    for count in range(PASSES):
        weighted = weighted_stack(some, part, _at(now, mean, part))
        again = solve_from(weighted, found.parameters.take(index, axis=-1))
        if count == 0 and searching:
            # The weights may have made another valley the deepest one.
            again = improved(weighted, again)
            found.second.update(again.second)
        write(found, index, again)
        fitted = _mean(some, part, again.parameters)
        with np.errstate(invalid="ignore"):
            moving = np.max(np.abs(fitted - mean) * (part.count > 0), axis=0) > SETTLED * size[index]
        stable[index] = ~moving & np.isfinite(again.total)
        keep = np.flatnonzero(moving)
        if keep.size == 0:
            break
        index, mean, part = index[keep], fitted.take(keep, axis=-1), part.take(keep)
        now, some = of_runs(now, keep), some_bounds(some, keep)
    return Settled(found, stable)


def _mean(stack: Stack, levels: Levels, parameters: Array) -> Array:
    with np.errstate(all="ignore"):
        mean = stack.model.response(levels.x, list(parameters))
    return np.where(np.isfinite(mean), mean, 0.0) * np.ones_like(levels.mean)


def write(found: Found, index: NDArray[np.intp], again: Found) -> None:
    """Put the solutions of some runs in their places."""
    found.parameters[:, index] = again.parameters
    found.total[index] = again.total
    found.tangent[index] = again.tangent
    found.converged[index] = again.converged


def some_bounds(stack: Stack, keep: NDArray[np.intp]) -> Stack:
    """The stack with the bounds of some of its runs."""
    return replace(stack, lower=some(stack.lower, keep), upper=some(stack.upper, keep))
