"""Curves and variance functions estimated from the same runs, each run by itself, over a stack."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.levels import Levels
from calib.curves.noise import NoiseModel, PowerOfMeanNoise, of_runs, with_runs
from calib.curves.reweight import PASSES, Settled, solve_with_noise, some_bounds, write
from calib.curves.search import Found
from calib.curves.solver import Problem
from calib.curves.stack_covariance import leverages
from calib.curves.stack_problem import Stack
from calib.curves.variance_function import Scatter, estimate_variance_functions

Array = NDArray[np.float64]

ONE_RUN = "estimated from this run"
# Noise between constant and relative, as most instruments have: where the first fit starts.
FIRST = PowerOfMeanNoise(1.4, ONE_RUN)
# A variance function stands still when its shape over the levels changes by less than this share.
STANDS_STILL = 1e-6


@dataclass(frozen=True, slots=True)
class Estimated:
    """Solutions, and the noise models they belong to: one, with a parameter for each run."""

    settled: Settled
    noise: NoiseModel


def solve_estimating_noise(
    problem: Problem, stack: Stack, levels: Levels, family: str, starts: Array | dict[int, Array]
) -> Estimated:
    """Alternate between the curves and their variance functions until both stand still.

    Parameters
    ----------
    problem : Problem
        Model and fixed values of all runs.
    stack : Stack
        The same as a stack; its readings and weights are replaced.
    levels : Levels
    family : {'power-of-mean', 'additive-relative'}
    starts : (k, R) array or mapping
        As in `solve_with_noise`.

    Raises
    ------
    MethodError
        For an unknown family.
    """
    noise = FIRST.bound_to(levels.mean)
    found = solve_with_noise(stack, levels, noise, starts).found
    noise = _estimated(problem, levels, noise, found, family)
    stable, index = np.zeros(levels.runs, dtype=bool), np.arange(levels.runs)
    now, part, some = noise, levels, stack
    for _ in range(PASSES):
        again = solve_with_noise(some, part, now, found.parameters.take(index, axis=-1))
        write(found, index, again.found)
        following = _estimated(problem, part, now, again.found, family)
        # Only the shape counts: a common factor is taken up by the scale.
        moving = _change_of_shape(now, following, part) > STANDS_STILL
        stable[index] = ~moving & again.stable
        keep = np.flatnonzero(moving)
        if keep.size == 0:
            break
        index, part, some = index[keep], part.take(keep), some_bounds(some, keep)
        now = of_runs(following, keep)
        noise = with_runs(noise, index, now)
    return Estimated(Settled(found, stable), noise)


def _estimated(problem: Problem, levels: Levels, noise: NoiseModel, found: Found, family: str) -> NoiseModel:
    """Variance function of each run from the residuals of its curve."""
    with np.errstate(all="ignore"):
        mean = problem.model.response(levels.x, list(found.parameters))
        mean = np.where(np.isfinite(mean), mean, 0.0) * np.ones_like(levels.mean)
        squares = levels.count * (levels.filled - mean) ** 2 + np.where(levels.count > 0, levels.pure, 0.0)
    scatter = Scatter(squares, levels.count, mean, leverages(problem, levels, noise, found))
    return estimate_variance_functions(family, scatter, ONE_RUN)


def _change_of_shape(before: NoiseModel, after: NoiseModel, levels: Levels) -> Array:
    """Range over the levels of the logarithm of the variances' ratio (R,)."""
    with np.errstate(all="ignore"):
        ratio = np.log(after.variance(levels.filled, levels.x) / before.variance(levels.filled, levels.x))
    present = levels.count > 0
    return np.asarray(
        np.max(np.where(present, ratio, -np.inf), axis=0) - np.min(np.where(present, ratio, np.inf), axis=0)
    )
