"""A robust fit: readings far from the curve pull it less. A check beside the curve, never the curve."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from calib.curves.curve import Curve
from calib.curves.fit import fit
from calib.curves.history_noise import ENOUGH_RUNS, HistoryNoise
from calib.curves.refit import own_start, requested_bounds

Array = NDArray[np.float64]

# 95 % efficient for normal scatter (Huber and Ronchetti, Robust Statistics, 2nd ed. 2009, from memory).
HUBER, BISQUARE = 1.345, 4.685
# A weight of zero would be no weight; this one is as good as none.
LEAST_WEIGHT = 1e-8
PASSES = 25
# The fit stands still when no mean moves by more than this share of the noise.
SETTLED = 1e-3


def robust_fit(curve: Curve) -> Curve | None:
    """Fit the standards of a curve again with bisquare weights, after a start with Huber's.

    The scale is that of the history where there is one, else 1.4826 times the median size of the
    residuals, so that no single reading can hide itself.

    Returns
    -------
    Curve or None
        None where there is no scatter to compare with, or the robust fit does not settle.
    """
    if not curve.converged or curve.standards.concentration.ndim > 1:
        return None
    scale = _scale(curve)
    if not scale > 0:
        return None
    start = _reweighted(curve, curve, scale, _huber)
    return None if start is None else _reweighted(curve, start, scale, _bisquare)


def _huber(u: Array) -> Array:
    return np.asarray(HUBER / np.maximum(np.abs(u), HUBER))


def _bisquare(u: Array) -> Array:
    return np.asarray(np.maximum(1.0 - (u / BISQUARE) ** 2, 0.0) ** 2)


def _scale(curve: Curve) -> float:
    noise = curve.noise
    if isinstance(noise, HistoryNoise) and noise.runs >= ENOUGH_RUNS:
        return noise.spread.sd
    if noise.known_scale:
        return 1.0
    if curve.degrees_of_freedom < 1:
        return 0.0
    n = curve.standards.response.size
    return float(1.4826 * np.median(np.abs(_standardised(curve))) * np.sqrt(n / curve.degrees_of_freedom))


def _standardised(curve: Curve) -> Array:
    x = curve.standards.concentration
    mean = curve.predict(x)
    return np.asarray((curve.standards.response - mean) / np.sqrt(curve.noise.at_standards(mean, x)))


def _reweighted(curve: Curve, start: Curve, scale: float, weight: Callable[[Array], Array]) -> Curve | None:
    x, y = curve.standards.concentration, curve.standards.response
    here = start
    for _ in range(PASSES):
        mean = here.predict(x)
        root = np.sqrt(curve.noise.at_standards(mean, x))
        w = np.maximum(weight((y - mean) / (scale * root)), LEAST_WEIGHT)
        there = fit(
            x,
            y,
            curve.response_model,
            relative_sd=root / np.sqrt(w),
            fixed=curve.fixed,
            bounds=requested_bounds(curve),
            start=own_start(here),
        )
        if not there.converged:
            return None
        moved = np.max(np.abs(there.predict(x) - mean) / (scale * root))
        here = there
        if moved < SETTLED:
            return here
    return None
