"""Variance functions estimated from residuals by pseudo-likelihood.

PL(t) = N ln(mean(r²/((1 − h)·G_t))) + Σ ln G_t, with leverage h: Davidian and
Giltinan, Nonlinear Models for Repeated Measurement Data (1995), ch. 2 and 5 (from
memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calib.curves.noise import AdditiveRelativeNoise, NoiseModel, PowerOfMeanNoise, of_run, response_floor
from calib.errors import MethodError

Array = NDArray[np.float64]

# Range of theta in G = mean^(2·theta); beyond it no instrument noise is known.
THETA = (-0.2, 2.0)
ESTIMATED = ("power-of-mean", "additive-relative")
# Points of the grid on which the lowest value is looked for, and halvings that close in on it.
GRID, HALVINGS = 25, 50
# A reading the curve runs through tells nothing of the noise: 1 − leverage is taken no smaller.
LEAST_FREEDOM = 0.05


@dataclass(frozen=True, slots=True)
class Scatter:
    """Residuals of R runs by level.

    Attributes
    ----------
    squares : (n, R) array
        Sums of squared unweighted residuals.
    count : (n, 1) or (n, R) array
        Readings behind each sum.
    mean : (n, R) array
        Fitted responses.
    leverage : (n, R) array
        Diagonal of the hat matrix for one reading.
    """

    squares: Array
    count: Array
    mean: Array
    leverage: Array


def pseudo_likelihood(noise: NoiseModel, residual: Array, mean: Array, leverage: Array) -> float:
    """PL of one variance function, up to a constant; smaller is better."""
    with np.errstate(all="ignore"):
        g = noise.variance(mean, mean)
        spread = residual**2 / (np.maximum(1.0 - leverage, LEAST_FREEDOM) * g)
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
    squares, means, leverages = residual[:, None] ** 2, mean[:, None], leverage[:, None]
    scatter = Scatter(squares, np.ones_like(squares), means, leverages)
    return of_run(estimate_variance_functions(family, scatter, origin), 0)


def estimate_variance_functions(family: str, scatter: Scatter, origin: str) -> NoiseModel:
    """Variance function of each run: one noise model whose parameter is an array (R,).

    Parameters
    ----------
    family : {'power-of-mean', 'additive-relative'}
    scatter : Scatter
    origin : str
        Where the residuals come from, in words.

    Raises
    ------
    MethodError
        For an unknown family.
    """
    mean, present = scatter.mean, scatter.count > 0
    seen = np.where(present, mean, np.nan)
    largest = np.maximum(np.nanmax(np.abs(seen), axis=0), 1e-100)
    if family == "power-of-mean":
        floor = response_floor(seen)
        size = np.log(np.maximum(np.abs(mean), floor) / largest)
        low, high = (np.full(mean.shape[1], bound) for bound in THETA)
        theta = _lowest(scatter, lambda t: (2.0 * t * size, 2.0 * size), low, high)
        return PowerOfMeanNoise(2.0 * theta, origin, floor)
    if family == "additive-relative":
        span = np.nanmax(seen, axis=0) - np.nanmin(seen, axis=0)
        span = np.log(np.maximum(span / largest, 1e-6))
        squared = (mean / largest) ** 2

        def law(log_ratio: Array) -> tuple[Array, Array]:
            constant = np.exp(2.0 * log_ratio)
            return np.log(constant + squared), 2.0 * constant / (constant + squared)

        log_ratio = _lowest(scatter, law, span + np.log(1e-4), span + np.log(1e3))
        return AdditiveRelativeNoise(largest * np.exp(log_ratio), origin)
    raise MethodError(f"unknown variance function '{family}'; known are {', '.join(ESTIMATED)}")


Law = Callable[[Array], tuple[Array, Array]]
"""Parameter (R,) to ln G and its derivative in the parameter, both (n, R)."""


def _lowest(scatter: Scatter, law: Law, low: Array, high: Array) -> Array:
    """Parameter (R,) at which the pseudo-likelihood is lowest: best point of a grid, then halving.

    The sign of the derivative settles the last digits; comparing nearly equal values could not.
    """
    with np.errstate(all="ignore"):
        corrected = scatter.squares / np.maximum(1.0 - scatter.leverage, LEAST_FREEDOM)
        corrected = np.where(np.isfinite(corrected), corrected, 0.0)
        share = np.linspace(0.0, 1.0, GRID)[:, None]
        grid = low + share * (high - low)
        values = np.array([_value_and_slope(scatter.count, corrected, *law(t))[0] for t in grid])
        best = np.argmin(np.where(np.isnan(values), np.inf, values), axis=0)
        runs = np.arange(best.size)
        low, high = grid[np.maximum(best - 1, 0), runs], grid[np.minimum(best + 1, GRID - 1), runs]
        for _ in range(HALVINGS):
            middle = 0.5 * (low + high)
            rising = _value_and_slope(scatter.count, corrected, *law(middle))[1] > 0
            low, high = np.where(rising, low, middle), np.where(rising, middle, high)
    return np.asarray(0.5 * (low + high))


def _value_and_slope(count: Array, corrected: Array, log_g: Array, slope: Array) -> tuple[Array, Array]:
    """PL and its derivative (R,), up to a constant."""
    readings = np.sum(count * np.ones_like(corrected), axis=0)
    spread = corrected * np.exp(-log_g)
    total = np.sum(spread, axis=0)
    value = readings * np.log(np.maximum(total / readings, 1e-300)) + np.sum(count * log_g, axis=0)
    tilt = np.sum(count * slope, axis=0) - readings * np.sum(spread * slope, axis=0) / np.maximum(
        total, 1e-300
    )
    return value, tilt
