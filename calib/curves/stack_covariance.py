"""Inverse information of every run of a stack."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from calib.curves.levels import Levels
from calib.curves.noise import NoiseModel
from calib.curves.search import Found
from calib.curves.solver import Problem

Array = NDArray[np.float64]

# Inverted in blocks, so that memory stays flat.
BLOCK = 4096


def inverses(problem: Problem, levels: Levels, noise: NoiseModel, found: Found) -> Array:
    """Inverse of J'WJ (R, k, k) for every run, zero for fixed parameters."""
    k = problem.free.size
    inverse = np.zeros((levels.runs, k, k))
    for i in range(0, levels.runs, BLOCK):
        part = np.arange(i, min(i + BLOCK, levels.runs))
        inverse[part] = _inverse_block(
            problem, levels.take(part), _part_of(noise, part), found.parameters[:, part]
        )
    return inverse


def _part_of(noise: NoiseModel, part: NDArray[np.intp]) -> NoiseModel:
    floor = getattr(noise, "floor", None)
    if not isinstance(floor, np.ndarray) or floor.ndim == 0:
        return noise
    return replace(noise, floor=floor[part])  # type: ignore[type-var]


def _inverse_block(problem: Problem, levels: Levels, noise: NoiseModel, p: Array) -> Array:
    model, free = problem.model, problem.free
    with np.errstate(all="ignore"):
        mean = model.response(levels.x, list(p)) * np.ones_like(levels.mean)
        variance = noise.at_standards(mean, np.broadcast_to(levels.x, mean.shape))
        weight = np.where(levels.count > 0, levels.count / variance, 0.0) * np.ones_like(mean)
        each = model.derivatives(levels.x, list(p))
        derivatives = [d * np.ones_like(mean) for d, f in zip(each, free, strict=True) if f]
        normal = np.empty((levels.runs, len(derivatives), len(derivatives)))
        for i, a in enumerate(derivatives):
            for j in range(i, len(derivatives)):
                normal[:, i, j] = normal[:, j, i] = np.einsum("nr,nr,nr->r", weight, a, derivatives[j])
        length = np.sqrt(np.diagonal(normal, axis1=1, axis2=2))
        usable = np.all((length > 0) & np.isfinite(length), axis=1)
        scaled = normal / (length[:, :, None] * length[:, None, :])
    scaled[~usable] = np.eye(len(derivatives))
    inner = np.full_like(scaled, np.nan)
    inner[usable] = _inverse_of_scaled(scaled[usable])
    with np.errstate(all="ignore"):
        inner = inner / (length[:, :, None] * length[:, None, :])
    full = np.zeros((levels.runs, free.size, free.size))
    where = np.flatnonzero(free)
    full[:, where[:, None], where[None, :]] = inner
    return full


def _inverse_of_scaled(scaled: Array) -> Array:
    """Inverse of matrices with unit diagonal; a pseudo-inverse where one is singular."""
    try:
        return np.asarray(np.linalg.inv(scaled))
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.pinv(scaled, hermitian=True))
