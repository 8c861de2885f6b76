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


def inner_products(columns: Array) -> Array:
    """Upper triangle of the inner products (c, c, R) of columns (c, n, R); zero below."""
    gram = np.zeros((columns.shape[0], columns.shape[0], columns.shape[2]))
    for i in range(columns.shape[0]):
        np.einsum("nr,jnr->jr", columns[i], columns[i:], out=gram[i, i:])
    return gram


def diagonal(gram: Array) -> Array:
    """Diagonals (c, R) of matrices (c, c, R), copied."""
    return np.array(np.einsum("ccr->cr", gram))


def sweep(gram: Array, count: int) -> list[Array]:
    """Eliminate the first columns from an upper triangle, in place; rows of the unit triangle."""
    upper = []
    for i in range(count):
        row = gram[i, i + 1 :] / gram[i, i]
        gram[i + 1 :, i + 1 :] -= gram[i, i + 1 : gram.shape[0], None] * row
        upper.append(row)
    return upper


def substituted(upper: Sequence[Array], like: Array) -> Array:
    """Solution (q, R) of swept systems whose right-hand side was the last column."""
    solved = np.empty_like(like)
    for i in reversed(range(len(upper))):
        value = upper[i][-1]
        for j in range(i + 1, len(upper)):
            value = value - upper[i][j - i - 1] * solved[j]
        solved[i] = value
    return solved


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


def held_at_bound(theta: Array, slope: Array, low: Array, high: Array) -> Mask | None:
    """Coordinates on a bound that the steepest descent would push across; None where there are none."""
    below, above = theta <= low, theta >= high
    if not (below | above).any():
        return None
    return (below & (slope < 0)) | (above & (slope > 0))


def damped_step(curvature: Array, slope: Array, damping: Array, held: Mask | None) -> tuple[Array, Array]:
    """Damped step and the decrease of the sum it predicts; nan where the curvature is not positive.

    Elimination without pivoting, from upper triangles.
    """
    m = slope.shape[0]
    system = np.concatenate([curvature, slope[:, None]], axis=1)
    if held is not None:
        system[:, :m][held[:, None] | held[None, :]] = 0.0
        system[:, m][held] = 0.0
    right = system[:, m].copy()
    pivots = np.einsum("iir->ir", system[:, :m])
    raised = pivots * damping
    pivots += raised
    # A coordinate that is held, or that nothing depends on, stays.
    idle = pivots == 0.0
    if idle.any():
        pivots[idle & (right == 0.0)] = 1.0
    step = substituted(sweep(system, m), slope)
    predicted = np.einsum("ir,ir->r", step, right + raised * step)
    positive = (pivots > 0.0).all(axis=0)
    return step, predicted if positive.all() else np.where(positive, predicted, np.nan)


def reach(theta: Array, step: Array, low: Array, high: Array) -> tuple[Array, Mask]:
    """Where the steps lead, shortened as a whole to stay inside the bounds, and which are whole (R,)."""
    trial = theta + step
    across: Mask = np.any((trial < low) | (trial > high), axis=0)
    if not across.any():
        return trial, ~across
    bound = np.where(step > 0, high, low)
    share = np.where(step != 0, (bound - theta) / np.where(step != 0, step, 1.0), np.inf)
    shortest = np.minimum(1.0, np.maximum(share.min(axis=0), 0.0))
    # Rounding must not leave a coordinate just short of the bound that stopped it.
    return np.where(share <= shortest, bound, theta + shortest * step), np.asarray(shortest == 1.0)


def secant_update(second: Array, moved: Array, change: Array, normal: Array, usable: Mask) -> Array:
    """Second-order part (m, m, R) that explains how the gradient changed over a step (m, R).

    Symmetric rank one (Broyden 1967), as a complement to Gauss–Newton (Dennis, Gay and Welsch
    1981, ACM Transactions on Mathematical Software 7, 348–368). ``change`` is J'r before the step
    less J'r after it; zero where the step is not ``usable``.
    """
    left = change - np.einsum("ijr,jr->ir", normal + second, moved)
    along = np.einsum("ir,ir->r", left, moved)
    size = np.sqrt(np.einsum("ir,ir->r", left, left) * np.einsum("ir,ir->r", moved, moved))
    told = usable & (np.abs(along) > 1e-8 * size)
    scaled = left / np.where(told, along, np.inf)
    return np.where(usable, second + scaled[:, None] * left, 0.0)
