"""A stack evaluated at searched coordinates: sums of squares, linear parameters, normal equations.

Two evaluations give the same numbers. The quick one forms inner products of all columns once
and eliminates the linear parameters from them by sweeping; that loses the square of the
condition in digits, and where that is too many its sum is infinite. The careful one projects the
columns themselves (modified Gram–Schmidt) at about twice the cost.

The residual enters with the linear parameters of the previous point taken off. What is left to
eliminate shrinks with the steps, so that the sum and the gradient are as exact as the residual.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.stack_algebra import (
    back_substitute,
    diagonal,
    dot,
    filling,
    inner_products,
    orthogonalise,
    project_out,
    substituted,
    sweep,
)
from calib.curves.stack_problem import Stack
from calib.curves.stack_roles import EXACT, SOUND, Roles

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Point:
    """Where a stack stands.

    Attributes
    ----------
    total : (R,) array
        Weighted sum of squares without the pure error; infinite where it cannot be evaluated, or
        not with enough digits.
    linear : (q, R) array
        Eliminated parameters.
    normal : (m, m, R) array
        J'J of the m searched coordinates, linear parameters projected out.
    slope : (m, R) array
        J'r of the same.
    exact : (R,) bool array
        Whether the sum kept its digits: not so where much was eliminated from it.
    """

    total: Array
    linear: Array
    normal: Array
    slope: Array
    exact: Mask

    def take(self, keep: NDArray[np.intp]) -> Point:
        """Some of the runs."""
        return Point(
            self.total[keep],
            self.linear.take(keep, axis=-1),
            self.normal.take(keep, axis=-1),
            self.slope.take(keep, axis=-1),
            self.exact[keep],
        )


def either(taken: Mask, there: Point, here: Point) -> Point:
    """``there`` for the runs that took their step, ``here`` for the others."""
    return Point(
        np.where(taken, there.total, here.total),
        np.where(taken, there.linear, here.linear),
        np.where(taken, there.normal, here.normal),
        np.where(taken, there.slope, here.slope),
        np.where(taken, there.exact, here.exact),
    )


def quick_point(stack: Stack, roles: Roles, theta: Array, before: Array) -> Point:
    """Evaluate from inner products; ``before`` (q, R) are the previous linear parameters."""
    p = natural(stack, roles, theta)
    derivative = stack.model.derivatives(stack.x, p)
    held = _held(stack, roles, theta)
    order, q = (*roles.eliminated, *roles.searched), len(roles.eliminated)
    columns = np.empty((len(order) + 1, *stack.y.shape))
    for row, i in enumerate(order):
        np.multiply(derivative[i], stack.root_weight, out=columns[row])
    np.multiply(_rest(stack.y, derivative, held), stack.root_weight, out=columns[-1])
    for row in range(q):
        columns[-1] -= before[row] * columns[row]
    gram = inner_products(columns)
    whole = diagonal(gram)
    upper = sweep(gram, q)
    linear = before + substituted(upper, before)
    left = diagonal(gram)
    sound = (left[:-1] > SOUND * whole[:-1]).all(axis=0)
    if not sound.all():
        gram[-1, -1, ~sound] = np.inf
    scale = _scales(roles, p, linear, held)
    return _point(gram[q:, q:], linear, scale, left[-1] > EXACT * whole[-1])


def careful_point(stack: Stack, roles: Roles, theta: Array, before: Array) -> Point:
    """Evaluate by projection of the columns, whatever the linear parameters were ``before``."""
    p = natural(stack, roles, theta)
    derivative = stack.model.derivatives(stack.x, p)
    held = _held(stack, roles, theta)
    weight = stack.root_weight
    residual = weight * _rest(stack.y, derivative, held)
    orthogonal, triangle = orthogonalise(
        [filling(weight * derivative[i], residual) for i in roles.eliminated]
    )
    parts = [dot(q, residual) for q in orthogonal]
    for q, part in zip(orthogonal, parts, strict=True):
        residual = residual - part * q
    solved = back_substitute(triangle, parts)
    linear = np.array(solved) if solved else np.empty_like(before)
    tangents = [project_out(filling(weight * derivative[i], residual), orthogonal) for i in roles.searched]
    gram = inner_products(np.array([*tangents, residual]))
    scale = _scales(roles, p, linear, held)
    return _point(gram, linear, scale, np.ones(stack.runs, dtype=bool))


def _point(gram: Array, linear: Array, scale: Sequence[Array | float], exact: Mask) -> Point:
    """The point of inner products (m + 1, m + 1, R) of projected tangents at unit amplitude and residual."""
    normal, slope, total = gram[:-1, :-1], gram[:-1, -1], gram[-1, -1]
    for i, size in enumerate(scale):
        slope[i] *= size
        for j in range(i, len(scale)):
            normal[i, j] *= size * scale[j]
            normal[j, i] = normal[i, j]
    # Sweeping may leave a rounding error below zero; what cannot be evaluated is infinitely bad.
    total = np.where(np.isfinite(total), np.maximum(total, 0.0), np.inf)
    return Point(total, linear, normal, slope, exact)


def natural(stack: Stack, roles: Roles, theta: Array) -> list[Array | float]:
    """Parameters for the model: searched values, fixed values, unit amplitude."""
    p: list[Array | float] = [u if linear else t for u, t, linear in roles.plain(stack.template.tolist())]
    for row, i, log in zip(theta, roles.searched, roles.in_logarithm, strict=True):
        if not roles.is_linear[i]:
            p[i] = np.exp(row) if log else row
    return p


def _held(stack: Stack, roles: Roles, theta: Array) -> dict[int, Array | float]:
    """Linear parameters that are fixed or searched, by index."""
    return {
        i: theta[roles.searched.index(i)] if i in roles.searched else float(stack.template[i])
        for i in roles.held_linear
    }


def _rest(y: Array, derivative: Sequence[Array], held: Mapping[int, Array | float]) -> Array:
    """Responses without the part of the held linear parameters."""
    for i, value in held.items():
        y = y - value * derivative[i]
    return y


def _scales(
    roles: Roles, p: Sequence[Array | float], linear: Array, held: Mapping[int, Array | float]
) -> list[Array | float]:
    """What the derivatives at unit amplitude are multiplied by, one for each searched coordinate."""
    amplitude: Array | float = 0.0
    for i, weight in roles.amplitude:
        amplitude = amplitude + weight * (held[i] if i in held else linear[roles.eliminated.index(i)])
    return [
        1.0 if roles.is_linear[i] else (amplitude * p[i] if log else amplitude)
        for i, log in zip(roles.searched, roles.in_logarithm, strict=True)
    ]
