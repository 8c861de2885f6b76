"""Inverse information of every run of a stack."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from calib.curves.levels import Levels
from calib.curves.noise import NoiseModel
from calib.curves.reweight import some_noise
from calib.curves.search import Found
from calib.curves.solver import Problem
from calib.curves.stack_algebra import dot

Array = NDArray[np.float64]

# Inverted in blocks, so that memory stays flat.
BLOCK = 4096
# A pivot this small of a matrix with unit diagonal is rounding.
VANISHING = 1e-13


def inverses(problem: Problem, levels: Levels, noise: NoiseModel, found: Found) -> Array:
    """Inverse of J'WJ (R, k, k) for every run, zero for fixed parameters."""
    k = problem.free.size
    inverse = np.zeros((levels.runs, k, k))
    for i in range(0, levels.runs, BLOCK):
        part = np.arange(i, min(i + BLOCK, levels.runs))
        inverse[part] = _inverse_block(
            problem, levels.take(part), some_noise(noise, part), found.parameters[:, part]
        )
    return inverse


def _inverse_block(problem: Problem, levels: Levels, noise: NoiseModel, p: Array) -> Array:
    model, free = problem.model, np.flatnonzero(problem.free)
    with np.errstate(all="ignore"):
        # Only a noise model that follows the fit asks for the fitted means.
        mean = model.response(levels.x, list(p)) if noise.follows_fit else levels.x
        mean = np.broadcast_to(mean, levels.mean.shape)
        variance = noise.at_standards(mean, np.broadcast_to(levels.x, mean.shape))
        root = np.sqrt(np.where(levels.count > 0, levels.count / variance, 0.0))
        each = model.derivatives(levels.x, list(p))
        columns = [np.broadcast_to(root * each[i], mean.shape) for i in free]
        scaled = np.empty((free.size, free.size, levels.runs))
        length = [np.sqrt(dot(a, a)) for a in columns]
        for i, a in enumerate(columns):
            for j in range(i, free.size):
                scaled[i, j] = scaled[j, i] = dot(a, columns[j]) / (length[i] * length[j])
        inner = _inverse_of_scaled(scaled)
        full = np.zeros((levels.runs, problem.free.size, problem.free.size))
        for i, row in enumerate(free):
            for j, column in enumerate(free):
                full[:, row, column] = inner[i, j] / (length[i] * length[j])
    return full


def _inverse_of_scaled(scaled: Array) -> Array:
    """Inverse of symmetric matrices (k, k, R) with unit diagonal, by elimination for all runs at once.

    A pseudo-inverse takes the place where a pivot vanishes, nan where a matrix is not finite.
    """
    k, runs = scaled.shape[0], scaled.shape[2]
    a = scaled.copy()
    inverse = np.repeat(np.eye(k)[:, :, None], runs, axis=2)
    smallest = np.full(runs, np.inf)
    for i in range(k):
        pivot = a[i, i].copy()
        smallest = np.fmin(smallest, np.abs(pivot))
        a[i], inverse[i] = a[i] / pivot, inverse[i] / pivot
        for j in range(k):
            if j != i:
                factor = a[j, i].copy()
                a[j] -= factor * a[i]
                inverse[j] -= factor * inverse[i]
    finite = np.all(np.isfinite(scaled), axis=(0, 1))
    inverse[:, :, ~finite] = np.nan
    for r in np.flatnonzero(finite & ~(smallest > VANISHING)):
        inverse[:, :, r] = np.linalg.pinv(scaled[:, :, r], hermitian=True)
    return inverse
