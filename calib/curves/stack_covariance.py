"""Inverse information of every run of a stack."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from calib.curves.levels import Levels
from calib.curves.noise import NoiseModel, of_runs
from calib.curves.search import Found
from calib.curves.solver import Problem
from calib.curves.stack_algebra import diagonal, inner_products

Array = NDArray[np.float64]

# Inverted in blocks, so that memory stays flat.
BLOCK = 2048
# A pivot this small of a matrix with unit diagonal is rounding.
VANISHING = 1e-13


def inverses(problem: Problem, levels: Levels, noise: NoiseModel, found: Found) -> Array:
    """Inverse of J'WJ (R, k, k) for every run, zero for fixed parameters."""
    k = problem.free.size
    inverse = np.zeros((levels.runs, k, k))
    for i in range(0, levels.runs, BLOCK):
        part = np.arange(i, min(i + BLOCK, levels.runs))
        inverse[part] = _inverse_block(
            problem, levels.take(part), of_runs(noise, part), found.parameters.take(part, axis=-1)
        )
    return inverse


def leverages(problem: Problem, levels: Levels, noise: NoiseModel, found: Found) -> Array:
    """Leverage of one reading at each level (n, R): the diagonal of the hat matrix."""
    leverage = np.empty_like(levels.mean)
    for i in range(0, levels.runs, BLOCK):
        part = np.arange(i, min(i + BLOCK, levels.runs))
        some, own, p = levels.take(part), of_runs(noise, part), found.parameters.take(part, axis=-1)
        with np.errstate(all="ignore"):
            columns, count = _weighted_columns(problem, some, own, p)
            inverse = _inverse(columns)
            leverage[:, part] = np.einsum("inr,ijr,jnr->nr", columns, inverse, columns) / count
    return leverage


def _inverse_block(problem: Problem, levels: Levels, noise: NoiseModel, p: Array) -> Array:
    free = np.flatnonzero(problem.free)
    full = np.zeros((problem.free.size, problem.free.size, levels.runs))
    with np.errstate(all="ignore"):
        full[np.ix_(free, free)] = _inverse(_weighted_columns(problem, levels, noise, p)[0])
    return np.asarray(np.moveaxis(full, 2, 0))


def _weighted_columns(problem: Problem, levels: Levels, noise: NoiseModel, p: Array) -> tuple[Array, Array]:
    """Derivatives in the free parameters times root weights (free, n, R), and readings a level."""
    model = problem.model
    # Only a noise model that follows the fit asks for the fitted means.
    mean = model.response(levels.x, list(p)) if noise.follows_fit else levels.mean
    mean = mean if mean.shape == levels.mean.shape else np.broadcast_to(mean, levels.mean.shape)
    variance = noise.at_standards(mean, np.broadcast_to(levels.x, mean.shape))
    root = np.sqrt(np.where(levels.count > 0, levels.count / variance, 0.0))
    each = model.derivatives(levels.x, list(p))
    free = np.flatnonzero(problem.free)
    columns = np.empty((free.size, *mean.shape))
    for row, i in enumerate(free):
        np.multiply(root, each[i], out=columns[row])
    return columns, np.maximum(levels.count, 1.0)


def _inverse(columns: Array) -> Array:
    """Inverse (k, k, R) of the inner products of columns (k, n, R)."""
    gram = inner_products(columns)
    length = np.sqrt(diagonal(gram))
    size = length[:, None] * length
    return np.asarray(_inverse_of_scaled(gram / size) / size)


def _inverse_of_scaled(upper: Array) -> Array:
    """Inverse of symmetric matrices (k, k, R) with unit diagonal, given by their upper triangle.

    Elimination in place for all runs at once (Gauss and Jordan). A pseudo-inverse takes the place
    where a pivot vanishes, nan where a matrix is not finite.
    """
    scaled = upper + np.swapaxes(np.triu(np.ones(upper.shape[:2]), 1)[:, :, None] * upper, 0, 1)
    a = scaled.copy()
    smallest = np.full(a.shape[2], np.inf)
    for i in range(a.shape[0]):
        pivot = a[i, i].copy()
        smallest = np.fmin(smallest, np.abs(pivot))
        row, column = a[i] / pivot, a[:, i].copy()
        a -= column[:, None] * row
        a[:, i] = -column / pivot
        a[i] = row
        a[i, i] = 1.0 / pivot
    sound = smallest > VANISHING
    if not sound.all():
        finite = np.all(np.isfinite(scaled), axis=(0, 1))
        a[:, :, ~finite] = np.nan
        for r in np.flatnonzero(finite & ~sound):
            a[:, :, r] = np.linalg.pinv(scaled[:, :, r], hermitian=True)
    return a
