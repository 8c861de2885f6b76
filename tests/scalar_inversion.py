"""The inversion of a prediction band, one unknown at a time, by scipy's root finder."""

from __future__ import annotations

import math

import numpy as np
from scipy.optimize import brentq
from scipy.special import stdtrit

from calib import Curve

STEP = 0.1
REACH = 10.0


def band_interval(
    curve: Curve, y: float, replicates: int = 1, confidence: float = 0.95
) -> tuple[float, float]:
    """Ends of the interval of one response on a curve in ln x, walked outwards and then bracketed."""
    q = float(stdtrit(curve.coverage_freedom, 0.5 + 0.5 * confidence))

    def excess(t: float) -> float:
        x = math.exp(t)
        variance = curve.reading_variance(x) / replicates + curve.fit_variance(x)
        return abs(y - float(curve.predict(x))) - q * math.sqrt(variance)

    start = math.log(float(curve.response_model.inverse(y, curve.values)))
    return math.exp(_crossing(excess, start, -STEP)), math.exp(_crossing(excess, start, +STEP))


def _crossing(excess: object, start: float, step: float) -> float:
    """First crossing outwards from an estimate; infinite where there is none in reach."""
    inner = start
    for _ in range(int(3 * REACH / STEP)):
        outer = inner + step
        if excess(outer) > 0:
            return float(brentq(excess, inner, outer, xtol=1e-13, rtol=8 * np.finfo(float).eps))
        inner = outer
    return math.copysign(math.inf, step)
