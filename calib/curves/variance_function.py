"""Variance functions estimated from residuals by pseudo-likelihood.

PL(t) = N ln(mean(r²/((1 − h)·G_t))) + Σ ln G_t, with leverage h: Davidian and
Giltinan, Nonlinear Models for Repeated Measurement Data (1995), ch. 2 and 5 (from
memory).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from calib.curves.noise import AdditiveRelativeNoise, NoiseModel, PowerOfMeanNoise, response_floor
from calib.errors import MethodError

Array = NDArray[np.float64]

# Range of theta in G = mean^(2·theta); beyond it no instrument noise is known.
THETA = (-0.2, 2.0)
ESTIMATED = ("power-of-mean", "additive-relative")
# Cells of the first grid and of each closer one; five times closer, a cell is 1e-5 of the range.
GRID, CELLS, ZOOMS = 25, 9, 5


def pseudo_likelihood(noise: NoiseModel, residual: Array, mean: Array, leverage: Array) -> float:
    """PL of one variance function, up to a constant; smaller is better."""
    with np.errstate(all="ignore"):
        g = noise.variance(mean, mean)
        spread = residual**2 / (np.maximum(1.0 - leverage, 0.05) * g)
    return float(mean.size * np.log(max(float(spread.mean()), 1e-300)) + np.log(g).sum())


def estimate_variance_function(
    family: str, residual: Array, mean: Array, leverage: Array, origin: str
) -> NoiseModel:
    """Variance function of one family that fits the residuals best.

    Parameters
    ----------
    family : {'power-of-mean', 'additive-relative'}
    residual, mean, leverage : (n,) arrays
        Unweighted residuals, fitted responses, diagonal of the hat matrix.
    origin : str
        Where the residuals come from, in words.

    Raises
    ------
    MethodError
        For an unknown family.
    """
    span = max(float(np.ptp(mean)), float(np.max(np.abs(mean))) * 1e-6, 1e-100)
    candidate: Callable[[float], NoiseModel]
    if family == "power-of-mean":
        floor = response_floor(mean)
        bounds = THETA

        def candidate(theta: float) -> NoiseModel:
            return PowerOfMeanNoise(2.0 * theta, origin, floor)

    elif family == "additive-relative":
        bounds = (float(np.log(1e-4 * span)), float(np.log(1e3 * span)))

        def candidate(log_ratio: float) -> NoiseModel:
            return AdditiveRelativeNoise(float(np.exp(log_ratio)), origin)

    else:
        raise MethodError(f"unknown variance function '{family}'; known are {', '.join(ESTIMATED)}")
    return candidate(_lowest(lambda t: pseudo_likelihood(candidate(t), residual, mean, leverage), *bounds))


def _lowest(function: Callable[[float], float], low: float, high: float) -> float:
    """Where a function is lowest: the best of a grid, closed in on, then the vertex of a parabola.

    The vertex follows the data smoothly, as comparing nearly equal values could not.
    """
    at = np.linspace(low, high, GRID)
    for _ in range(ZOOMS):
        best = int(np.argmin([function(float(t)) for t in at]))
        best = min(max(best, 1), at.size - 2)
        at = np.linspace(at[best - 1], at[best + 1], CELLS)
    values = [function(float(t)) for t in at]
    best = int(np.argmin(values))
    if best in (0, at.size - 1):
        return float(at[best])
    left, lowest, right = values[best - 1 : best + 2]
    bend = left - 2.0 * lowest + right
    return float(at[best] + (0.5 * (at[1] - at[0]) * (left - right) / bend if bend > 0 else 0.0))
