"""The response models written out once more, plainly, and one example of each.

The formulas take complex numbers, so that their derivatives can be had by a complex
step (Squire and Trapp, SIAM Review 40, 1998, 110–112, from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

PLAIN: dict[str, Callable[..., Any]] = {
    "line": lambda x, intercept, slope: intercept + slope * x,
    "proportional": lambda x, slope: slope * x,
    "quadratic": lambda x, intercept, slope, curvature: intercept + slope * x + curvature * x**2,
    "power-law": lambda x, offset, scale, exponent: offset + scale * x**exponent,
    "saturation": lambda x, offset, capacity, half: offset + capacity * x / (half + x),
    "squared-saturation": lambda x, offset, capacity, half: offset + capacity * x**2 / (half**2 + x**2),
    "first-order": lambda x, offset, amplitude, rate: offset + amplitude * (1 - np.exp(-rate * x)),
    "quenching": lambda x, offset, unquenched, constant: offset + unquenched / (1 + constant * x),
    "4PL": lambda x, zero, infinite, midpoint, slope: (
        infinite + (zero - infinite) / (1 + (x / midpoint) ** slope)
    ),
    "5PL": lambda x, zero, infinite, midpoint, slope, asymmetry: (
        infinite + (zero - infinite) / (1 + (x / midpoint) ** slope) ** asymmetry
    ),
}

# Rising and falling parameters of each model for concentrations of order one.
EXAMPLES: dict[str, tuple[tuple[float, ...], ...]] = {
    "line": ((0.3, 2.1), (0.3, -2.1)),
    "proportional": ((1.7,), (-1.7,)),
    "quadratic": ((0.2, 2.0, -0.01), (0.2, -2.0, 0.01), (0.2, 2.0, 0.3)),
    "power-law": ((0.1, 1.4, 0.7), (5.0, -1.4, 1.6)),
    "saturation": ((0.1, 2.0, 3.0), (2.5, -2.0, 3.0)),
    "squared-saturation": ((0.1, 2.0, 3.0), (2.5, -2.0, 3.0)),
    "first-order": ((0.1, 2.0, 0.25), (2.5, -2.0, 0.25)),
    "quenching": ((0.0, 100.0, 0.4), (3.0, 100.0, 0.4)),
    "4PL": ((0.05, 2.5, 3.0, 1.2), (2.5, 0.05, 3.0, 0.8)),
    "5PL": ((0.05, 2.5, 3.0, 1.2, 0.6), (2.5, 0.05, 3.0, 0.8, 1.9)),
}

CONCENTRATIONS = np.geomspace(0.02, 40.0, 23)


def complex_step(function: Callable[[Any], Any], at: float | np.ndarray) -> np.ndarray:
    """Derivative of an analytic function, exact to rounding."""
    step = 1e-30
    return np.asarray(np.imag(function(at + 1j * step)) / step)
