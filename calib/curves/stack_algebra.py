"""Linear algebra of many small runs at once: readings along the first axis, runs along the last."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def filling(values: Array, like: Array) -> Array:
    """The same values in the full shape of the stack."""
    return values if values.shape == like.shape else np.broadcast_to(values, like.shape)


def dot(a: Array, b: Array) -> Array:
    """Inner product of each run (R,)."""
    product: Array = np.einsum("nr,nr->r", a, b)
    return product


def orthogonalise(basis: Sequence[Array]) -> tuple[list[Array], list[list[Array]]]:
    """Modified Gram–Schmidt, twice where three columns can lean on each other."""
    orthogonal: list[Array] = []
    triangle: list[list[Array]] = []
    rounds = 2 if len(basis) > 2 else 1
    for v in basis:
        column = [np.zeros(v.shape[1]) for _ in orthogonal]
        for _ in range(rounds):
            for j, q in enumerate(orthogonal):
                part = dot(q, v)
                column[j] = column[j] + part
                v = v - part * q
        length = np.sqrt(dot(v, v))
        orthogonal.append(v / np.where(length > 0, length, 1.0))
        triangle.append([*column, length])
    return orthogonal, triangle


def back_substitute(triangle: list[list[Array]], parts: Sequence[Array]) -> list[Array]:
    """Linear parameters from the triangular factor (columns) and the projections."""
    count = len(parts)
    solved: list[Array] = [np.zeros(())] * count
    for i in reversed(range(count)):
        value = parts[i]
        for j in range(i + 1, count):
            value = value - triangle[j][i] * solved[j]
        length = triangle[i][i]
        solved[i] = np.where(length > 0, value / np.where(length > 0, length, 1.0), 0.0)
    return solved


def project_out(v: Array, orthogonal: Sequence[Array]) -> Array:
    """What is left of ``v`` outside the span of orthonormal columns."""
    for q in orthogonal:
        v = v - dot(q, v) * q
    return v


def held_at_bound(theta: Array, slope: Array, low: Array, high: Array) -> Mask:
    """Coordinates on a bound that the steepest descent would push across."""
    return ((theta <= low) & (slope < 0)) | ((theta >= high) & (slope > 0))


def damped_step(normal: Array, slope: Array, damping: Array, held: Mask) -> tuple[Array, Array]:
    """Damped Gauss–Newton step and the decrease of the sum it predicts."""
    m = slope.shape[0]
    if m == 0:
        return slope, np.zeros(damping.size)
    matrix, right = normal.copy(), slope
    if held.any():
        right = np.where(held, 0.0, slope)
        matrix = np.where(held[:, None] | held[None, :], 0.0, matrix)
    for i in range(m):
        diagonal = matrix[i, i]
        matrix[i, i] = np.where(diagonal > 0, diagonal * (1.0 + damping), 1.0)
    step = solve_small(matrix, right)
    along = np.einsum("ir,ir->r", step, right)
    if not damping.any():
        return step, np.where(np.isfinite(along), along, 0.0)
    predicted = 2.0 * along - np.einsum("ir,ijr,jr->r", step, normal, step)
    return step, np.where(np.isfinite(predicted), predicted, 0.0)


def solve_small(matrix: Array, right: Array) -> Array:
    """Solve m × m systems along the last axis by elimination without pivoting.

    The matrices are positive (semi)definite after damping, where no pivoting is needed.
    """
    m = right.shape[0]
    a, b = matrix.copy(), right.copy()
    for i in range(m):
        for j in range(i + 1, m):
            factor = a[j, i] / a[i, i]
            a[j, i:] -= factor * a[i, i:]
            b[j] -= factor * b[i]
    for i in reversed(range(m)):
        for j in range(i + 1, m):
            b[i] -= a[i, j] * b[j]
        b[i] = b[i] / a[i, i]
    return np.where(np.isfinite(b), b, 0.0)


def reach(theta: Array, step: Array, low: Array, high: Array) -> Array:
    """Share of the whole step that stays inside the bounds (R,)."""
    if step.shape[0] == 0:
        return np.ones(step.shape[1])
    room = np.where(step > 0, high - theta, low - theta)
    share = np.where(step != 0, room / np.where(step != 0, step, 1.0), np.inf)
    return np.asarray(np.minimum(1.0, np.maximum(share.min(axis=0), 0.0)))
