"""Roots of many functions of one variable at once, each in its own bracket."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

MOST_STEPS = 100
# Width at which a bracket is a point, as a share of the root's size and of the first bracket.
RELATIVE_WIDTH = 4.0 * float(np.finfo(np.float64).eps)
SHARE_OF_BRACKET = 1e-12


def bracketed_roots(function: Callable[[Array], Array], inside: Array, outside: Array) -> Array:
    """Root of each function between a point where it is at most zero and one where it is not.

    Inverse quadratic interpolation where the last three points promise it, else bisection
    (Chandrupatla, Advances in Engineering Software 28 (1997) 145; from memory).

    Parameters
    ----------
    function : callable
        Takes positions (m,) and returns values (m,), function i at position i. Undefined values
        count as above zero.
    inside, outside : (m,) arrays
        Ends of the brackets. Where the function is above zero at both, that is the inner end.

    Returns
    -------
    (m,) array
    """
    a, b = outside.copy(), inside.copy()
    at_a, at_b = _values(function, a), _values(function, b)
    crossing = at_b <= 0
    c, at_c = a, at_a
    t = np.full(a.shape, 0.5)
    width = SHARE_OF_BRACKET * np.abs(outside - inside)
    for _ in range(MOST_STEPS):
        middle = a + t * (b - a)
        value = _values(function, middle)
        same = (value > 0) == (at_a > 0)
        c, at_c = np.where(same, a, b), np.where(same, at_a, at_b)
        b, at_b = np.where(same, b, a), np.where(same, at_b, at_a)
        a, at_a = middle, value
        nearer = np.abs(at_a) < np.abs(at_b)
        length = np.abs(b - a)
        tolerance = RELATIVE_WIDTH * np.abs(np.where(nearer, a, b)) + width
        done = (length <= tolerance) | (at_a == 0) | ~crossing
        if done.all():
            break
        t = _next_share(a, b, c, at_a, at_b, at_c)
        with np.errstate(divide="ignore", invalid="ignore"):
            least = np.fmin(0.5 * tolerance / length, 0.5)
        # A root that is found stays, so that its digits do not depend on the others.
        t = np.where(done, 0.0, np.clip(t, least, 1.0 - least))
    return np.where(crossing, np.where(np.abs(at_a) <= np.abs(at_b), a, b), inside)


def _values(function: Callable[[Array], Array], at: Array) -> Array:
    value = function(at)
    return np.where(np.isnan(value), np.inf, value)


def _next_share(a: Array, b: Array, c: Array, at_a: Array, at_b: Array, at_c: Array) -> Array:
    """Where between a and b to look next, as a share of the way."""
    with np.errstate(all="ignore"):
        across = (a - b) / (c - b)
        rise = (at_a - at_b) / (at_c - at_b)
        smooth = (rise**2 < across) & ((1.0 - rise) ** 2 < 1.0 - across)
        t = at_a / (at_b - at_a) * at_c / (at_b - at_c) + (c - a) / (b - a) * at_a / (at_c - at_a) * at_b / (
            at_c - at_b
        )
    return np.where(smooth & np.isfinite(t), t, 0.5)
