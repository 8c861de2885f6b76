"""Least squares for formulas of which nothing is known but their value and gradient.

MINPACK's Levenberg–Marquardt, or a trust region inside bounds, then Gauss–Newton steps
through an orthogonal factorisation, which give the last digits that a stopping rule leaves.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from calib.curves.solver import Problem, gauss_newton_step, within

Array = NDArray[np.float64]


def general_least_squares(problem: Problem, start: Array) -> Array:
    """Solver coordinates of a minimum near a start inside the bounds."""
    from scipy.optimize import least_squares

    if start.size <= problem.y.size:
        free_run = least_squares(
            problem.residual,
            start,
            problem.jacobian,
            method="lm",
            x_scale="jac",
            ftol=1e-15,
            xtol=1e-15,
            gtol=1e-15,
            max_nfev=4000,
        ).x
        if within(problem, free_run):
            return polish(problem, free_run)
    bounded = least_squares(
        problem.residual,
        start,
        problem.jacobian,
        bounds=problem.limits(),
        method="trf",
        x_scale="jac",
        ftol=1e-15,
        xtol=1e-15,
        gtol=1e-15,
        max_nfev=2000,
    ).x
    return polish(problem, bounded)


def polish(problem: Problem, coordinates: Array) -> Array:
    """Gauss–Newton steps inside the bounds while they do not make the sum larger."""
    here = coordinates
    r = problem.residual(here)
    total = float(r @ r)
    for _ in range(50):
        step, tangent = gauss_newton_step(problem.jacobian(here), r)
        candidate = here + step
        if not np.all(np.isfinite(candidate)) or not within(problem, candidate):
            return here
        r_new = problem.residual(candidate)
        new_total = float(r_new @ r_new)
        if not new_total <= total * (1.0 + 1e-14):
            return here
        here, r, total = candidate, r_new, new_total
        if tangent <= 1e-13 * np.sqrt(total) + 1e-17:
            return here
    return here
