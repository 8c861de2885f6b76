"""The derivative-free simplex of Nelder and Mead (1965) as a second solver."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calib.curves.general_solver import polish
from calib.curves.solver import Problem

Array = NDArray[np.float64]


def polished_simplex(problem: Problem, start: Array) -> Array:
    """Solver coordinates the simplex ends at, with the last digits from Gauss–Newton steps."""
    return polish(problem, simplex(problem, start))


def simplex(problem: Problem, start: Array) -> Array:
    """Nelder–Mead, restarted until it stands still; no derivative is used."""
    from scipy.optimize import minimize

    low, high = problem.limits()
    here = start
    value = np.inf
    for _ in range(12):
        options: Any = {
            "xatol": 1e-10,
            "fatol": 1e-18,
            "maxiter": 4000,
            "maxfev": 8000,
            "adaptive": start.size > 4,
            "initial_simplex": _first_simplex(here, low, high),
        }
        bounds = list(zip(low.tolist(), high.tolist(), strict=True))
        found = minimize(_total(problem), here, method="Nelder-Mead", bounds=bounds, options=options)
        here = found.x
        if value - found.fun <= 1e-12 * found.fun:
            break
        value = found.fun
    return np.asarray(here, dtype=np.float64)


def _total(problem: Problem) -> Callable[[Array], float]:
    return lambda c: float(np.sum(problem.residual(c) ** 2))


def _first_simplex(here: Array, low: Array, high: Array) -> Array:
    steps = np.where(here != 0, 0.05 * np.abs(here), 0.01)
    corners = np.tile(here, (here.size + 1, 1))
    for j in range(here.size):
        up = here[j] + steps[j]
        corners[j + 1, j] = up if up <= high[j] else here[j] - steps[j]
    return np.clip(corners, low, high)
